package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"runtime/pprof"
	"runtime/trace"

	"github.com/spf13/pflag"
)

// profiles are the recordings of where the program's time goes, for whoever wants it
// faster: `go tool pprof` and `go tool trace` read them.
type profiles struct {
	cpu, trace string
	stop       []func() error
}

func (p *profiles) addFlags(f *pflag.FlagSet) {
	f.StringVar(&p.cpu, "cpuprofile", "", "write to this file where processor time goes, for 'go tool pprof'")
	f.StringVar(&p.trace, "trace", "", "write to this file what runs when, for 'go tool trace'")
}

// start begins the recordings asked for.
func (p *profiles) start() error {
	for _, r := range []struct {
		flag, path string
		begin      func(io.Writer) error
		end        func()
	}{
		{"--cpuprofile", p.cpu, pprof.StartCPUProfile, pprof.StopCPUProfile},
		{"--trace", p.trace, trace.Start, trace.Stop},
	} {
		if r.path == "" {
			continue
		}
		if err := p.record(r.path, r.begin, r.end); err != nil {
			return fmt.Errorf("%s: %w; name a file that can be written", r.flag, err)
		}
	}
	return nil
}

// record writes to `<path>.part`, which gets its name when the recording ends.
func (p *profiles) record(path string, begin func(io.Writer) error, end func()) error {
	f, err := os.Create(path + ".part")
	if err != nil {
		return err
	}
	if err := begin(f); err != nil {
		return errors.Join(err, f.Close(), os.Remove(f.Name()))
	}
	p.stop = append(p.stop, func() error {
		end()
		if err := f.Close(); err != nil {
			return errors.Join(fmt.Errorf("write %s: %w", path, err), os.Remove(f.Name()))
		}
		return os.Rename(f.Name(), path)
	})
	return nil
}

// end ends all recordings.
func (p *profiles) end() error {
	var all error
	for _, stop := range p.stop {
		all = errors.Join(all, stop())
	}
	p.stop = nil
	return all
}
