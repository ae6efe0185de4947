package pair

import (
	"context"
	"errors"
	"fmt"
	"math"
	"path/filepath"
	"runtime"
	"strconv"
	"strings"
	"sync"
	"time"
	"unicode"
	"unicode/utf8"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/instrument"
	"mirrorloom/pipeline/product"
	"mirrorloom/pipeline/sequence"
)

// label is what one file of the night says of itself, and what becomes of it.
type label struct {
	name, path string
	hdu        int // of the image

	width, height, planes int

	step       int // 0 without STEP
	hasStep    bool
	maskID     string // lower case; empty without
	kindWord   string // as written; empty without KIND
	kind       sequence.Kind
	exptime    float64 // seconds; NaN without
	dateObs    string
	start      time.Time // zero without a readable DATE-OBS
	instrument string
	airmass    float64

	notes   []string
	verdict product.Verdict // empty until it is decided
	at      int             // index of the step it holds or serves; -1 for none
	by      string          // how it was matched
}

func (l *label) note(format string, args ...any) {
	l.notes = append(l.notes, fmt.Sprintf(format, args...))
}

// refuse decides against a frame.
func (l *label) refuse(v product.Verdict, format string, args ...any) {
	l.verdict = v
	l.note(format, args...)
}

// readLabels reads the headers of all files, in the order of names.
func readLabels(ctx context.Context, names []string, opts Options, p *instrument.Profile, progress func(done, total int)) ([]*label, error) {
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)
	workers := opts.Workers
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	labels := make([]*label, len(names))
	var mu sync.Mutex // over done and progress
	done := 0
	next := make(chan int)
	var group sync.WaitGroup
	for range min(workers, len(names)) {
		group.Go(func() {
			for i := range next {
				l, err := readLabel(names[i], opts, p)
				if err != nil {
					cancel(err)
					return
				}
				labels[i] = l
				mu.Lock()
				done++
				if progress != nil {
					progress(done, len(names))
				}
				mu.Unlock()
			}
		})
	}
	feed(ctx, next, len(names))
	group.Wait()
	if ctx.Err() != nil {
		return nil, context.Cause(ctx)
	}
	return labels, nil
}

// feed sends 0..n-1 until the context ends, and closes the channel.
func feed(ctx context.Context, next chan<- int, n int) {
	defer close(next)
	for i := range n {
		select {
		case next <- i:
		case <-ctx.Done():
			return
		}
	}
}

// readLabel reads one file. What is wrong with the file becomes its verdict; the
// error is one that every further file would meet as well.
func readLabel(name string, opts Options, p *instrument.Profile) (*label, error) {
	l := &label{name: name, path: filepath.Join(opts.Night, name), at: -1, exptime: math.NaN(), airmass: math.NaN()}
	if !plainName(name) {
		l.name = strconv.QuoteToASCII(name)
		l.refuse(product.Unreadable, "the name holds characters that no table can show; rename the file")
		return l, nil
	}
	file, err := fitsutil.OpenScratch(l.path, opts.ScratchDir)
	if err == nil {
		defer file.Close() // only read from
		var im *fitsutil.Image
		if im, err = file.FirstImage(); err == nil {
			l.read(im, file.HDUs()[0].Header, p)
			return l, nil
		}
	}
	if errors.Is(err, fitsutil.ErrNoRoom) {
		return nil, err
	}
	l.refuse(product.Unreadable, "%s", bare(err))
	return l, nil
}

// plainName tells whether a name fits a line of a table.
func plainName(name string) bool {
	return utf8.ValidString(name) && !strings.ContainsFunc(name, unicode.IsControl)
}

// bare is what fitsutil says of a file without the file's path, which its row
// names already.
func bare(err error) string {
	var e *fitsutil.Error
	if !errors.As(err, &e) {
		return err.Error()
	}
	without := *e
	without.File = ""
	return strings.TrimPrefix(without.Error(), ": ")
}

// read takes the size and the cards.
func (l *label) read(im *fitsutil.Image, primary *fitsutil.Header, p *instrument.Profile) {
	l.hdu, l.width, l.height, l.planes = im.HDU, im.Width(), im.Height(), im.Planes()
	c := cards{image: im.Header, primary: primary, l: l}
	k := p.Keywords
	if step, ok := c.integer(k.Step); ok {
		l.step, l.hasStep = step, true
	}
	l.maskID = strings.ToLower(c.text(k.MaskID))
	l.kindWord = c.text(k.Kind)
	if kind, ok := p.Kinds.Kind(l.kindWord); ok {
		l.kind = sequence.Kind(kind)
	}
	l.exptime, l.airmass = c.number(k.Exptime), c.number(k.Airmass)
	l.instrument = c.text(k.Instrume)
	if l.dateObs = c.text(k.DateObs); l.dateObs != "" {
		t, err := ParseDateObs(l.dateObs)
		if err != nil {
			l.note("%s %v", k.DateObs, err)
		}
		l.start = t
	}
}

// cards looks keywords up in the image's header first, in the primary one next.
// A card without a value counts as none; one that cannot be read too, and is
// noted.
type cards struct {
	image, primary *fitsutil.Header
	l              *label
}

func (c cards) header(key string) *fitsutil.Header {
	for _, h := range []*fitsutil.Header{c.image, c.primary} {
		if h.Has(key) {
			return h
		}
	}
	return nil
}

// value gives a card by one of the getters of Header.
func value[T any](c cards, key string, get func(*fitsutil.Header, string) (T, error)) (v T, ok bool) {
	h := c.header(key)
	if h == nil {
		return v, false
	}
	v, err := get(h, key)
	if err == nil {
		return v, true
	}
	var e *fitsutil.Error
	if errors.As(err, &e) {
		c.l.note("%s is not understood: %s", key, e.What)
	}
	return v, false
}

func (c cards) text(key string) string {
	s, _ := value(c, key, (*fitsutil.Header).Str)
	return strings.TrimSpace(s)
}

func (c cards) number(key string) float64 {
	if x, ok := value(c, key, (*fitsutil.Header).Float); ok {
		return x
	}
	return math.NaN()
}

func (c cards) integer(key string) (int, bool) {
	n, ok := value(c, key, (*fitsutil.Header).Int)
	return int(n), ok
}
