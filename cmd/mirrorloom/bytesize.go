package main

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// byteSize is a flag's value such as 512MiB, 2GiB or 800MB.
type byteSize int64

var byteUnits = []struct {
	suffix string
	bytes  float64
}{
	{"KiB", 1 << 10}, {"MiB", 1 << 20}, {"GiB", 1 << 30}, {"TiB", 1 << 40},
	{"kB", 1e3}, {"MB", 1e6}, {"GB", 1e9}, {"TB", 1e12}, {"B", 1},
}

// Set reads a size. The unit must be there: a bare number could mean anything.
func (s *byteSize) Set(text string) error {
	for _, u := range byteUnits {
		number, found := strings.CutSuffix(text, u.suffix)
		if !found {
			continue
		}
		v, err := strconv.ParseFloat(strings.TrimSpace(number), 64)
		if err != nil || math.IsNaN(v) || v <= 0 || v*u.bytes > math.MaxInt64/2 {
			break
		}
		*s = byteSize(v * u.bytes)
		return nil
	}
	return fmt.Errorf("%q is no size; write a number and a unit, such as 512MiB or 2GB", text)
}

func (s *byteSize) String() string {
	for _, u := range []int{2, 1, 0} {
		if b := int64(byteUnits[u].bytes); int64(*s)%b == 0 {
			return strconv.FormatInt(int64(*s)/b, 10) + byteUnits[u].suffix
		}
	}
	return strconv.FormatInt(int64(*s), 10) + "B"
}

// Type is what the help text calls the value.
func (s *byteSize) Type() string { return "size" }
