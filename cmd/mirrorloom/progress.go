package main

import (
	"io"
	"os"

	"github.com/schollz/progressbar/v3"
	"golang.org/x/term"
)

// progress gives a function that draws a bar on a terminal, one for each stage
// in turn; elsewhere it draws nothing, so that logs stay readable.
func (a *app) progress() func(stage string, done, total int) {
	file, ok := a.stderr.(*os.File)
	if !ok || !term.IsTerminal(int(file.Fd())) {
		return func(string, int, int) {}
	}
	var bar *progressbar.ProgressBar
	current := ""
	return func(stage string, done, total int) {
		if bar == nil || stage != current {
			if bar != nil {
				// A bar that cannot be drawn is no reason to stop.
				_ = bar.Finish()
			}
			bar, current = newBar(file, stage, total), stage
		}
		_ = bar.Set(done)
	}
}

func newBar(w io.Writer, stage string, total int) *progressbar.ProgressBar {
	return progressbar.NewOptions(total,
		progressbar.OptionSetWriter(w),
		progressbar.OptionSetDescription(stage),
		progressbar.OptionSetWidth(30),
		progressbar.OptionShowCount(),
		progressbar.OptionClearOnFinish(),
		progressbar.OptionSetPredictTime(true),
	)
}
