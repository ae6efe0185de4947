//go:build !race

package fitsutil

const raceEnabled = false
