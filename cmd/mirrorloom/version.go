package main

import (
	"fmt"
	"io"
	"runtime"

	"github.com/spf13/cobra"

	"mirrorloom/pipeline/version"
)

func newVersionCommand(a *app) *cobra.Command {
	return &cobra.Command{
		Use:   "version",
		Short: "Print the version",
		Args:  arguments(),
		RunE:  func(*cobra.Command, []string) error { return runVersion(a) },
	}
}

func runVersion(a *app) error {
	info := struct {
		Version  string `json:"version"`
		Go       string `json:"go"`
		Platform string `json:"platform"`
	}{version.Version, runtime.Version(), runtime.GOOS + "/" + runtime.GOARCH}
	return a.answer(info, func(w io.Writer) error {
		_, err := fmt.Fprintf(w, "mirrorloom %s (%s, %s)\n", info.Version, info.Go, info.Platform)
		return err
	})
}
