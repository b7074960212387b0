package main

import (
	"bufio"
	"fmt"
	"os"
	"strconv"
	"strings"
	"time"

	"leadline/hamiltonian/linalg"
)

// availableMemory returns the memory that can be used without swapping, in
// bytes, or 0 where the system does not tell (/proc/meminfo, Linux).
func availableMemory() int64 {
	file, err := os.Open("/proc/meminfo")
	if err != nil {
		return 0
	}
	defer file.Close()
	for lines := bufio.NewScanner(file); lines.Scan(); {
		fields := strings.Fields(lines.Text())
		if len(fields) >= 2 && fields[0] == "MemAvailable:" {
			kilobytes, _ := strconv.ParseInt(fields[1], 10, 64)
			return kilobytes << 10
		}
	}
	return 0
}

// readingMemory bounds what reading an integral file may take.
func readingMemory() int64 {
	if m := availableMemory(); m > 0 {
		return m
	}
	return 8 << 30
}

// checkMemory refuses what is beyond the machine.
func checkMemory(need int64, what string) error {
	if have := availableMemory(); have > 0 && need > have {
		return fmt.Errorf("%s needs about %s of memory, this machine has %s free", what, bytesText(need), bytesText(have))
	}
	return nil
}

// estimatedTime guesses how long a number of flops takes on this machine, from
// the speed of one product and the share of it that a walk in so many orbitals
// reaches (measured from 12 to 100 orbitals).
func estimatedTime(flops float64, orbitals, cores int) string {
	const n, repeats = 192, 20
	share := 0.7 * float64(orbitals) / float64(orbitals+30)
	a, b := make([]float64, n*n), make([]float64, n*n)
	begun := time.Now()
	for range repeats {
		linalg.Gemm(false, false, n, n, n, 1, a, n, a, n, 0, b, n)
	}
	speed := 2 * n * n * n * repeats / time.Since(begun).Seconds()
	seconds := flops / (share * speed * float64(cores))
	if seconds < 1 {
		return "seconds"
	}
	return time.Duration(seconds * float64(time.Second)).Round(time.Second).String()
}

func bytesText(n int64) string {
	switch {
	case n >= 1<<30:
		return fmt.Sprintf("%.1f GB", float64(n)/(1<<30))
	case n >= 1<<20:
		return fmt.Sprintf("%.0f MB", float64(n)/(1<<20))
	}
	return fmt.Sprintf("%.0f kB", float64(n)/(1<<10))
}
