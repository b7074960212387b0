#!/bin/sh
# Compares the integrals with those of libint2 (Debian: apt-get install libint2-dev g++).
set -eu
cd "$(dirname "$0")"
build=$(mktemp -d)
trap 'rm -r "$build"' EXIT
g++ -O2 -w -std=c++17 -I/usr/include/eigen3 library/main.cpp -o "$build/library" -lint2
go run . "$build/library"
