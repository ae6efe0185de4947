package combine

import (
	"context"
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"runtime"
	"runtime/debug"
	"time"

	"go.uber.org/zap"

	"mirrorloom/fitsutil"
	"mirrorloom/hadamard"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/report"
	"mirrorloom/pipeline/version"
)

// Options of Run.
type Options struct {
	// Runs are the folders that reduce wrote, two or more.
	Runs []string
	// MemoryBytes bounds the memory of the process; 0 for DefaultMemoryBytes.
	MemoryBytes int64
	// Workers compute at the same time; 0 for one a processor.
	Workers int
	// Out is a folder that exists and is empty, beside which its final name will be. A
	// folder in which Run failed is to be removed.
	Out string
	// Log receives what a user may want to know; nil for nothing.
	Log *zap.Logger
	// Progress, which may be nil, is called as a stage gets on.
	Progress func(stage string, done, total int)
}

// DefaultMemoryBytes suits a laptop that does other things as well.
const DefaultMemoryBytes = 1 << 30

// Result says what was written.
type Result struct {
	Run    *product.Run
	Schema product.Schema
	// Degraded says in plain sentences why the product is not whole; empty if it is
	// (exit code 3 or 0).
	Degraded []string
}

// Run combines runs into opts.Out: cube.fits, ledger.csv, run.json and report.html.
// Errors are one sentence that names the file and the cure.
func Run(ctx context.Context, opts Options) (*Result, error) {
	opts.setDefaults()
	previous := debug.SetMemoryLimit(opts.MemoryBytes - opts.MemoryBytes/16)
	defer debug.SetMemoryLimit(previous)
	c := &combination{opts: opts}
	defer c.close()
	start := time.Now()
	if err := c.open(); err != nil {
		return nil, err
	}
	if err := c.make(ctx); err != nil {
		return nil, err
	}
	c.seconds = time.Since(start).Seconds()
	opts.Log.Info("combined", zap.Int("runs", len(c.members)), zap.Float64("seconds", c.seconds))
	return c.result(ctx)
}

func (o *Options) setDefaults() {
	if o.Workers <= 0 {
		o.Workers = runtime.GOMAXPROCS(0)
	}
	if o.MemoryBytes == 0 {
		o.MemoryBytes = DefaultMemoryBytes
	}
	if o.Log == nil {
		o.Log = zap.NewNop()
	}
	if o.Progress == nil {
		o.Progress = func(string, int, int) {}
	}
}

// combination is a combined cube in the making.
type combination struct {
	opts    Options
	members []*member
	// schema is that of the combined cube.
	schema  product.Schema
	stream  *stream
	list    product.Members
	seconds float64
}

// close gives back everything; what was committed stays.
func (c *combination) close() {
	for _, m := range c.members {
		m.file.Close() // only read from
	}
	if c.stream != nil && c.stream.out != nil {
		c.stream.out.Abort()
	}
}

// open opens the runs and finds their places in the combined cube.
func (c *combination) open() error {
	if len(c.opts.Runs) < 2 {
		return errors.New("one run is nothing to combine; name two or more")
	}
	seen := map[string]string{}
	for _, name := range c.opts.Runs {
		m, err := open(name)
		if err != nil {
			return err
		}
		c.members = append(c.members, m)
		sum := m.images[0].Header
		if text, err := sum.Str("DATASUM"); err == nil {
			if other, twice := seen[text]; twice {
				return fmt.Errorf("%s and %s hold the same light; name each run once", other, name)
			}
			seen[text] = name
		}
		if m != c.members[0] {
			if err := agree(c.members[0], m); err != nil {
				return err
			}
		}
	}
	c.span()
	return nil
}

// span finds the combined cube's extent: it begins with the first element and row of any
// run and ends with the last.
func (c *combination) span() {
	j0, y0, j1, y1 := 0, 0, 0, 0
	for _, m := range c.members {
		j0, y0 = min(j0, m.element), min(y0, m.row)
		j1, y1 = max(j1, m.element+m.width()), max(y1, m.row+m.height())
	}
	for _, m := range c.members {
		m.element -= j0
		m.row -= y0
	}
	c.schema = c.members[0].schema
	first := c.schema.Elements
	c.schema.Elements, c.schema.Rows = j1-j0, y1-y0
	// The field's centre is that of the first run.
	c.schema.ElementShift += float64(first-1)/2 - float64(j0) - float64(c.schema.Elements-1)/2
	c.schema.RowCenter -= float64(y0)
}

// make writes cube.fits and ledger.csv.
func (c *combination) make(ctx context.Context) error {
	var err error
	if c.stream, err = newStream(c.members, c.schema.Elements, c.schema.Rows, c.opts.MemoryBytes, c.opts.Workers); err != nil {
		return err
	}
	primary, err := c.primary()
	if err != nil {
		return err
	}
	images, err := c.images()
	if err != nil {
		return err
	}
	if c.stream.out, err = fitsutil.CreateCube(filepath.Join(c.opts.Out, product.CubeFile), primary, images); err != nil {
		return err
	}
	if err := c.stream.run(ctx, func(done, total int) { c.opts.Progress("combine", done, total) }); err != nil {
		return err
	}
	if c.list, err = c.runs(); err != nil {
		return err
	}
	ledger := c.ledger()
	for _, t := range []*fitsutil.Table{ledger.Table(), c.list.Table()} {
		if err := c.stream.out.AppendTable(t); err != nil {
			return err
		}
	}
	if err := c.stream.out.Commit(); err != nil {
		return err
	}
	return fitsutil.WriteAtomic(filepath.Join(c.opts.Out, product.LedgerFile), ledger.WriteCSV)
}

// result writes run.json and the report, and sums up.
func (c *combination) result(ctx context.Context) (*Result, error) {
	degraded := c.degraded()
	run := &product.Run{
		Schema: product.RunSchema, Version: version.Version, CPULevel: hadamard.CPULevel(),
		Inputs: c.inputs(), Quality: c.quality(), Combined: c.list,
		Settings: map[string]any{"runs": c.opts.Runs, "memory_bytes": c.opts.MemoryBytes, "workers": c.opts.Workers},
		Warnings: append(append([]string{}, degraded...), c.warnings()...),
		Stages:   []product.Stage{{Name: "combine", Seconds: c.seconds, Bytes: c.bytes()}},
	}
	if len(degraded) > 0 {
		run.Exit = product.ExitDegraded
	}
	if err := fitsutil.WriteAtomic(filepath.Join(c.opts.Out, product.RunFile), run.Write); err != nil {
		return nil, err
	}
	err := report.Write(ctx, c.opts.Out, report.Input{
		Run: run, Ledger: c.ledger(), Schema: c.schema, Profile: c.members[0].card("PROFNAME"), Degraded: degraded,
	})
	if err != nil {
		return nil, err
	}
	return &Result{Run: run, Schema: c.schema, Degraded: degraded}, nil
}

// bytes read and written.
func (c *combination) bytes() int64 {
	const read, written = 4 + 4 + 2 + 4, 4 + 4 + 2 + 4
	total := int64(c.schema.Elements) * int64(c.schema.Rows) * written
	for _, m := range c.members {
		total += int64(m.width()) * int64(m.height()) * read
	}
	return total * int64(c.schema.Grid.Count)
}

// number is nil for what is not a number.
func number(x float64) *float64 {
	if math.IsNaN(x) {
		return nil
	}
	return &x
}
