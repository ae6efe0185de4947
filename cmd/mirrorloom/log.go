package main

import (
	"fmt"
	"io"
	"os"

	"go.uber.org/zap"
	"go.uber.org/zap/zapcore"
)

// newLogger builds the log: short lines on stderr, or JSON lines in a file.
// An unknown level or a file that cannot be opened is an error.
func newLogger(level, file string, stderr io.Writer) (*zap.Logger, error) {
	lvl, err := zapcore.ParseLevel(level)
	if err != nil {
		return nil, fmt.Errorf("--log-level %q is unknown; use debug, info, warn or error", level)
	}
	if file == "" {
		cfg := zap.NewDevelopmentEncoderConfig()
		cfg.TimeKey = "" // a person reads these as they come
		core := zapcore.NewCore(zapcore.NewConsoleEncoder(cfg), zapcore.AddSync(stderr), lvl)
		return zap.New(core), nil
	}
	f, err := os.OpenFile(file, os.O_CREATE|os.O_APPEND|os.O_WRONLY, 0o644)
	if err != nil {
		return nil, fmt.Errorf("open the log file: %w; name a file that can be written with --log-file", err)
	}
	cfg := zap.NewProductionEncoderConfig()
	cfg.EncodeTime = zapcore.RFC3339TimeEncoder
	return zap.New(zapcore.NewCore(zapcore.NewJSONEncoder(cfg), f, lvl)), nil
}
