package main

import (
	"bytes"
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"io/fs"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"time"

	"mirrorloom/internal/trial"
	"mirrorloom/pipeline/product"
)

func resumes() check {
	return check{
		name: "Killed runs that are resumed",
		about: `The night of the demo, with lamp frames, all corrections and the sky's subtraction, is reduced with
--resume and killed (SIGKILL) at ten moments, one at random in each tenth of the whole run
(seed 5), then resumed with another memory and other workers: cube.fits, elements.fits
and ledger.csv must have the bytes of a run that was not killed.`,
		run: runResumes,
	}
}

// resumeBudgets are those of the killed runs and of the resumed ones in turn.
var resumeBudgets = [][]string{{"--memory", "256MiB", "--workers", "2"}, {"--memory", "1GiB", "--workers", "1"}, {"--memory", "192MiB", "--workers", "3"}}

func runResumes(ctx context.Context, dir string) ([]trial.Finding, error) {
	const moments, seed = 10, 5
	demo, out := filepath.Join(dir, "demo"), filepath.Join(dir, "run")
	if err := exec.CommandContext(ctx, program, "demo", "-o", demo).Run(); err != nil {
		return nil, fmt.Errorf("demo: %w", err)
	}
	recipe := filepath.Join(dir, "recipe.yaml")
	if err := os.WriteFile(recipe, []byte("sky: {use: auto}\n"), 0o644); err != nil {
		return nil, err
	}
	args := []string{"reduce", filepath.Join(demo, "night"), "--sequence", filepath.Join(demo, "sequence"), "--recipe", recipe, "--products", "cube,elements", "--resume", "-o", out}
	start := time.Now()
	if _, err := reduceDemo(ctx, args, resumeBudgets[0]); err != nil {
		return nil, err
	}
	whole := time.Since(start)
	want, err := productSums(out)
	if err != nil {
		return nil, err
	}
	rng := rand.New(rand.NewPCG(seed, seed))
	same, within := 0, 0
	for i := range moments {
		if err := killDemo(ctx, out, append(args, resumeBudgets[i%3]...), time.Duration((float64(i)+rng.Float64())/moments*float64(whole))); err != nil {
			return nil, err
		}
		said, err := reduceDemo(ctx, args, resumeBudgets[(i+1)%3])
		if err != nil {
			return nil, err
		}
		if strings.Contains(said, "unfinished run is gone on with") {
			within++
		}
		got, err := productSums(out)
		if err != nil {
			return nil, err
		}
		if got == want {
			same++
		}
	}
	return []trial.Finding{
		trial.AtLeast("runs of the same bytes after being killed", float64(same), moments, moments),
		trial.AtLeast("of them gone on with, rather than started over", float64(within), 2, moments),
	}, nil
}

// reduceDemo reduces to the end and gives what was said.
func reduceDemo(ctx context.Context, args, budget []string) (string, error) {
	var stderr bytes.Buffer
	cmd := exec.CommandContext(ctx, program, append(append([]string{}, args...), budget...)...)
	cmd.Stderr = &stderr
	err := cmd.Run()
	var exit *exec.ExitError
	if errors.As(err, &exit) && exit.ExitCode() == product.ExitDegraded {
		err = nil // said the same way every time, or run.json would differ
	}
	if err != nil {
		return "", fmt.Errorf("reduce: %w: %s", err, stderr.String())
	}
	return stderr.String(), nil
}

// killDemo begins a reduction anew and kills it after some time. One that is over before
// is begun again and killed earlier.
func killDemo(ctx context.Context, out string, args []string, after time.Duration) error {
	for ; ; after = after * 9 / 10 {
		if err := errors.Join(os.RemoveAll(out), os.RemoveAll(out+".part")); err != nil {
			return err
		}
		cmd := exec.CommandContext(ctx, program, args...)
		if err := cmd.Start(); err != nil {
			return err
		}
		time.Sleep(after)
		if err := cmd.Process.Kill(); err != nil && !errors.Is(err, os.ErrProcessDone) {
			return err
		}
		_ = cmd.Wait() // what it was ended by shows in its folder
		if ctx.Err() != nil {
			return ctx.Err()
		}
		if _, err := os.Stat(out); errors.Is(err, fs.ErrNotExist) {
			return nil
		}
	}
}

// productSums digests the products of a run whose bytes are promised.
func productSums(out string) (string, error) {
	sums := ""
	for _, name := range []string{product.CubeFile, product.ElementsFile, product.LedgerFile} {
		data, err := os.ReadFile(filepath.Join(out, name))
		if err != nil {
			return "", err
		}
		sums += fmt.Sprintf("%s %x\n", name, sha256.Sum256(data))
	}
	return sums, nil
}
