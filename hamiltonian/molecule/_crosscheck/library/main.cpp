// Evaluates the shells given on standard input with the integral library libint2
// (Debian package libint2-dev) and writes, as doubles in native byte order:
// overlap, kinetic energy, nuclear attraction, x, y, z (n×n each), then all
// repulsion integrals (pq|rs), n×n×n×n.
//
// Input: number of shells; per shell l, number of primitives, centre, then
// exponents and coefficients; number of nuclei; per nucleus charge and place.
#include <libint2.hpp>
#include <cstdio>
#include <iostream>
#include <vector>

int main() {
  libint2::initialize();
  libint2::Shell::do_enforce_unit_normalization(true);
  size_t count;
  std::cin >> count;
  std::vector<libint2::Shell> basis;
  for (size_t i = 0; i < count; ++i) {
    int l;
    size_t primitives;
    std::array<double, 3> center;
    std::cin >> l >> primitives >> center[0] >> center[1] >> center[2];
    libint2::svector<double> exponents(primitives), coefficients(primitives);
    for (auto &x : exponents) std::cin >> x;
    for (auto &x : coefficients) std::cin >> x;
    basis.push_back(libint2::Shell(exponents, {{l, true, coefficients}}, center));
  }
  size_t nuclei;
  std::cin >> nuclei;
  std::vector<std::pair<double, std::array<double, 3>>> charges(nuclei);
  for (auto &c : charges) std::cin >> c.first >> c.second[0] >> c.second[1] >> c.second[2];
  std::vector<size_t> first;
  size_t n = 0, primitives = 0;
  int l = 0;
  for (auto &s : basis) {
    first.push_back(n);
    n += s.size();
    primitives = std::max(primitives, s.nprim());
    l = std::max(l, s.contr[0].l);
  }
  auto one = [&](libint2::Operator op, size_t from, size_t to) {
    libint2::Engine engine(op, primitives, l, 0, 0.0);
    if (op == libint2::Operator::nuclear) engine.set_params(charges);
    std::vector<std::vector<double>> out(to - from, std::vector<double>(n * n));
    for (size_t a = 0; a < count; ++a)
      for (size_t b = 0; b < count; ++b) {
        engine.compute(basis[a], basis[b]);
        for (size_t k = from; k < to; ++k) {
          auto *v = engine.results()[k];
          for (size_t p = 0; v && p < basis[a].size(); ++p)
            for (size_t q = 0; q < basis[b].size(); ++q)
              out[k - from][(first[a] + p) * n + first[b] + q] = v[p * basis[b].size() + q];
        }
      }
    for (auto &m : out) fwrite(m.data(), sizeof(double), m.size(), stdout);
  };
  one(libint2::Operator::overlap, 0, 1);
  one(libint2::Operator::kinetic, 0, 1);
  one(libint2::Operator::nuclear, 0, 1);
  one(libint2::Operator::emultipole1, 1, 4);
  libint2::Engine engine(libint2::Operator::coulomb, primitives, l, 0, 0.0);
  std::vector<double> all(n * n * n * n);
  for (size_t a = 0; a < count; ++a)
    for (size_t b = 0; b < count; ++b)
      for (size_t c = 0; c < count; ++c)
        for (size_t d = 0; d < count; ++d) {
          engine.compute(basis[a], basis[b], basis[c], basis[d]);
          auto *v = engine.results()[0];
          if (!v) continue;
          for (size_t p = 0; p < basis[a].size(); ++p)
            for (size_t q = 0; q < basis[b].size(); ++q)
              for (size_t r = 0; r < basis[c].size(); ++r)
                for (size_t s = 0; s < basis[d].size(); ++s)
                  all[(((first[a] + p) * n + first[b] + q) * n + first[c] + r) * n + first[d] + s] = *v++;
        }
  fwrite(all.data(), sizeof(double), all.size(), stdout);
  libint2::finalize();
}
