package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os/exec"
	"runtime"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"
	"go.uber.org/zap"

	"mirrorloom/pipeline/view"
)

type viewOptions struct {
	port int
	open bool
}

func (o *viewOptions) addFlags(f *pflag.FlagSet) {
	f.IntVar(&o.port, "port", 0, "port of this machine to answer at; 0 for any that is free")
	f.BoolVar(&o.open, "open", false, "open the page in the browser")
}

func newViewCommand(a *app) *cobra.Command {
	var o viewOptions
	cmd := &cobra.Command{
		Use:   "view RUN [--port N] [--open]",
		Short: "Look at a cube in a browser on this machine",
		Long: `Look at the cube of RUN, a folder that reduce or combine wrote, or a cube.fits, in a
browser on this machine: pictures at any wavelength, spectra of apertures with their
errors, lines, flags and the ledger.

The page's address is printed; it is answered to this machine alone, and nothing is asked
of any other. Ctrl-C ends it, with exit code 0.

What makes spectra fast is kept in RUN/.cache, made once in the background, somewhat
larger than the cube. It may be removed at any time. Where RUN cannot be written it is
kept in your own cache folder.`,
		Args: arguments("RUN, a folder that reduce or combine wrote, or a cube.fits"),
		RunE: func(cmd *cobra.Command, args []string) error { return runView(cmd.Context(), a, args[0], o) },
	}
	o.addFlags(cmd.Flags())
	return cmd
}

// viewAnswer is what view says once it answers.
type viewAnswer struct {
	URL   string        `json:"url"`
	Run   string        `json:"run"`
	Cache view.Progress `json:"cache"`
}

func runView(ctx context.Context, a *app, run string, o viewOptions) error {
	if o.port < 0 || o.port > 65535 {
		return usageError{fmt.Errorf("--port %d is no port; give 0 to 65535", o.port)}
	}
	v, err := view.Open(ctx, run)
	if err != nil {
		return err
	}
	l, err := view.Listen(ctx, o.port)
	if err != nil {
		return errors.Join(fmt.Errorf("port %d of this machine cannot be used: %w; choose another with --port", o.port, err), v.Close())
	}
	answer := viewAnswer{URL: "http://" + l.Addr().String() + "/", Run: run, Cache: v.Progress()}
	if note := answer.Cache.Note; note != "" {
		a.log.Warn(note)
	}
	err = a.answer(answer, func(w io.Writer) error {
		_, err := fmt.Fprintf(w, "%s\nCtrl-C ends it.\n", answer.URL)
		return err
	})
	if err != nil {
		return errors.Join(err, l.Close(), v.Close())
	}
	if o.open {
		if err := openBrowser(answer.URL); err != nil {
			a.log.Warn("no browser could be opened; open the address yourself", zap.Error(err))
		}
	}
	return errors.Join(view.Serve(ctx, l, v), v.Close())
}

// openBrowser asks the desktop to show a page.
func openBrowser(url string) error {
	name, args := "xdg-open", []string{url}
	switch runtime.GOOS {
	case "darwin":
		name = "open"
	case "windows":
		name, args = "rundll32", []string{"url.dll,FileProtocolHandler", url}
	}
	cmd := exec.Command(name, args...)
	if err := cmd.Start(); err != nil {
		return err
	}
	go func() { _ = cmd.Wait() }() // a browser that fails says so itself
	return nil
}
