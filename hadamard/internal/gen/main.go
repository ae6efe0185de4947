// Command gen writes package hadamard's assembly: one file of kernels and one
// of their declarations for each instruction set. It has its own go.mod, so
// that what it needs never reaches who imports the module.
//
//	go -C hadamard/internal/gen run . -o DIR
package main

import (
	"bytes"
	"flag"
	"fmt"
	"go/format"
	"os"
	"path/filepath"

	"github.com/mmcloughlin/avo/build"
	"github.com/mmcloughlin/avo/pass"
	"github.com/mmcloughlin/avo/printer"
)

// kernelSet is one .s file: functions that belong together, of one instruction
// set.
type kernelSet struct {
	name  string
	write func(g *generator)
}

var kernelSets = []kernelSet{
	{"transform", (*generator).transform},
	{"subsets", (*generator).subsets},
}

func main() {
	dir := flag.String("o", "../..", "folder to write to")
	flag.Parse()
	if err := run(*dir); err != nil {
		fmt.Fprintln(os.Stderr, "gen:", err)
		os.Exit(1)
	}
}

func run(dir string) error {
	for _, set := range kernelSets {
		for _, i := range []isa{avx2, avx512} {
			if err := write(dir, set, i); err != nil {
				return fmt.Errorf("%s for %s: %w", set.name, i.suffix, err)
			}
		}
	}
	return nil
}

// write makes NAME_ISA_amd64.s and NAME_ISA_amd64.go, the second of which
// declares the functions of the first.
func write(dir string, set kernelSet, i isa) error {
	ctx := build.NewContext()
	ctx.ConstraintExpr("!noasm")
	set.write(&generator{Context: ctx, isa: i})
	file, err := ctx.Result()
	if err != nil {
		return err
	}
	if err := pass.Compile.Execute(file); err != nil {
		return err
	}
	config := printer.Config{Name: "hadamard/internal/gen", Pkg: "hadamard"}
	code, err := printer.NewGoAsm(config).Print(file)
	if err != nil {
		return err
	}
	stubs, err := printer.NewStubs(config).Print(file)
	if err != nil {
		return err
	}
	if stubs, err = format.Source(stubs); err != nil {
		return err
	}
	base := filepath.Join(dir, set.name+"_"+i.name+"_amd64")
	if err := os.WriteFile(base+".s", tidy(code), 0o644); err != nil {
		return err
	}
	return os.WriteFile(base+".go", stubs, 0o644)
}

// tidy takes out the spaces that the printer leaves at the ends of lines.
func tidy(code []byte) []byte {
	lines := bytes.Split(code, []byte("\n"))
	for i := range lines {
		lines[i] = bytes.TrimRight(lines[i], " \t")
	}
	return bytes.Join(lines, []byte("\n"))
}
