package main

import (
	"bufio"
	"context"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"

	"mirrorloom/internal/child"
)

// gemm is numpy's product of float32 matrices by OpenBLAS on one thread, in a
// process that waits between products.
type gemm struct {
	kernel string // OpenBLAS's name of its kernels
	chosen bool   // by OpenBLAS itself
	cmd    *exec.Cmd
	in     io.WriteCloser
	out    *bufio.Scanner
}

// coreTypes are kernels of OpenBLAS that it may not choose by itself on a
// processor newer than it is; the empty one leaves the choice to it.
var coreTypes = []string{"", "SkylakeX", "Haswell"}

// gemmPixels is how many columns a product has: many, as suits it best.
func gemmPixels(v int) int { return min(16384, 8<<20/v) }

func startGEMM(ctx context.Context, coreType string) (*gemm, error) {
	g := &gemm{chosen: coreType == "", cmd: exec.CommandContext(ctx, python, filepath.Join(given, "numpy_gemm.py"))}
	g.cmd.Env = child.Environment()
	if coreType != "" {
		g.cmd.Env = append(g.cmd.Env, "OPENBLAS_CORETYPE="+coreType)
	}
	g.cmd.Stderr = os.Stderr
	var err error
	if g.in, err = g.cmd.StdinPipe(); err != nil {
		return nil, err
	}
	out, err := g.cmd.StdoutPipe()
	if err != nil {
		return nil, err
	}
	g.out = bufio.NewScanner(out)
	if err := g.cmd.Start(); err != nil {
		return nil, err
	}
	g.kernel, err = g.line()
	return g, err
}

func (g *gemm) line() (string, error) {
	if !g.out.Scan() {
		return "", fmt.Errorf("numpy_gemm.py ended: %w", g.cmd.Wait())
	}
	return strings.TrimSpace(g.out.Text()), nil
}

// rate is how many GB/s go in and out of products with a v x v matrix.
func (g *gemm) rate(v int) (float64, error) {
	pixels := gemmPixels(v)
	if _, err := fmt.Fprintln(g.in, v, pixels); err != nil {
		return 0, err
	}
	line, err := g.line()
	if err != nil {
		return 0, err
	}
	seconds, err := strconv.ParseFloat(line, 64)
	if err != nil {
		return 0, fmt.Errorf("numpy_gemm.py answered %q: %w", line, err)
	}
	return float64(2*4*v*pixels) / seconds / 1e9, nil
}

func (g *gemm) stop() {
	_ = g.in.Close()
	_ = g.cmd.Wait()
}

// bestGEMM is the one of coreTypes that is fastest at v = 511, and what each
// reached there.
func bestGEMM(ctx context.Context) (*gemm, []string, error) {
	var best *gemm
	var most float64
	var tried []string
	for _, t := range coreTypes {
		g, err := startGEMM(ctx, t)
		if err != nil {
			return nil, nil, err
		}
		var rates []float64
		for range decodeRuns {
			r, err := g.rate(511)
			if err != nil {
				return nil, nil, err
			}
			rates = append(rates, r)
		}
		rate := middle(rates)
		how := "forced"
		if g.chosen {
			how = "its own choice"
		}
		tried = append(tried, fmt.Sprintf("%s (%s) %.2f GB/s", g.kernel, how, rate))
		if rate <= most {
			g.stop()
			continue
		}
		if best != nil {
			best.stop()
		}
		best, most = g, rate
	}
	return best, tried, nil
}
