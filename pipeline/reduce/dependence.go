package reduce

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"mirrorloom/pipeline/pair"
	"mirrorloom/pipeline/parallel"
	"mirrorloom/pipeline/version"
)

// dependence is all that the bytes of a run's strips follow from. A run goes on with what
// another one left only if theirs are equal. Memory and workers change no byte, and the
// folders' names none of the strips.
type dependence struct {
	// Program is the digest of the program's file: another build of the same version may
	// round differently.
	Version, Program                  string
	Sequence, Profile, Target, Recipe string // digests
	// Beside are the files that the recipe and the sequence name.
	Beside                     []digestedFile
	Cube, Elements, AsLabelled bool
	Cycles                     []int
	Frames                     []digestedFile // all of the night
}

// digestedFile is a file as it was. Of a large one the digest is that of its beginning
// only: to read a night twice would double the time. A frame's header is there, with its
// DATASUM if the observatory writes it; whatever rewrites pixels alone moves the time.
type digestedFile struct {
	Name       string
	Bytes      int64 // -1 for one that cannot be read
	ModifiedNS int64 // since 1970
	Begins     string
}

// digestedBytes of a file go into its digest: all of a table, and of a frame its header.
const digestedBytes = 64 << 10

// dependsOn looks at everything that the reduction is about to read.
func (r *reduction) dependsOn(ctx context.Context) (*dependence, error) {
	d := &dependence{
		Version: version.Version, Program: programDigest(),
		Sequence: r.seq.SHA, Profile: r.seq.ProfileSHA, Target: r.seq.TargetSHA, Recipe: r.opts.Recipe.SHA,
		Cube: r.opts.Cube, Elements: r.opts.Elements, AsLabelled: r.opts.AsLabelled, Cycles: r.opts.Cycles,
	}
	for _, path := range r.opts.Recipe.files() {
		d.Beside = append(d.Beside, digestFile(path, path))
	}
	tables, err := filepath.Glob(filepath.Join(r.opts.Sequence, "*.csv"))
	if err != nil {
		return nil, err
	}
	for _, path := range tables { // sorted
		d.Beside = append(d.Beside, digestFile(path, filepath.Base(path)))
	}
	names, err := pair.List(r.opts.Night)
	if err != nil {
		return nil, err
	}
	d.Frames = make([]digestedFile, len(names))
	err = parallel.Do(ctx, r.opts.Workers, len(names), func(_, i int) error {
		d.Frames[i] = digestFile(filepath.Join(r.opts.Night, names[i]), names[i])
		return nil
	})
	return d, err
}

// files are those that a recipe names.
func (r *Recipe) files() []string {
	var all []string
	for _, path := range []string{r.Arc.Use, r.Throughput.Use, r.Stars.Use, r.Flux.Use, r.Flux.Star, r.Grid.Onto} {
		if path != "" && path != useAuto && path != useOff {
			all = append(all, path)
		}
	}
	return all
}

// digestFile tells of a file what a change would change. What cannot be read is told by
// whoever needs it.
func digestFile(path, name string) digestedFile {
	unknown := digestedFile{Name: name, Bytes: -1}
	f, err := os.Open(path)
	if err != nil {
		return unknown
	}
	defer f.Close() // only read from
	info, err := f.Stat()
	if err != nil || !info.Mode().IsRegular() {
		return unknown
	}
	sum := sha256.New()
	if _, err := io.Copy(sum, io.LimitReader(f, digestedBytes)); err != nil {
		return unknown
	}
	return digestedFile{Name: name, Bytes: info.Size(), ModifiedNS: info.ModTime().UnixNano(), Begins: hex.EncodeToString(sum.Sum(nil))}
}

// programDigest is that of the running program; empty if it cannot be read.
func programDigest() string {
	path, err := os.Executable()
	if err != nil {
		return ""
	}
	f, err := os.Open(path)
	if err != nil {
		return ""
	}
	defer f.Close() // only read from
	sum := sha256.New()
	if _, err := io.Copy(sum, f); err != nil {
		return ""
	}
	return hex.EncodeToString(sum.Sum(nil))
}

// changed says in a clause what is not as it was; empty if all is.
func (d *dependence) changed(was *dependence) string {
	switch {
	case d.Version != was.Version || d.Program != was.Program || d.Program == "":
		return "it was made by another build of the program"
	case d.Sequence != was.Sequence || d.Profile != was.Profile || d.Target != was.Target:
		return "the sequence is another one"
	case d.Recipe != was.Recipe:
		return "the recipe was changed"
	case d.Cube != was.Cube || d.Elements != was.Elements:
		return "other products are asked for"
	case d.AsLabelled != was.AsLabelled:
		return "--as-labelled was changed"
	case !slices.Equal(d.Cycles, was.Cycles):
		return "other cycles are asked for"
	}
	if text := changedFiles(d.Beside, was.Beside, "file"); text != "" {
		return text
	}
	return changedFiles(d.Frames, was.Frames, "frame")
}

// changedFiles says which files are not as they were.
func changedFiles(now, was []digestedFile, what string) string {
	before := map[string]digestedFile{}
	for _, f := range was {
		before[f.Name] = f
	}
	var names []string
	for _, f := range now {
		if old, there := before[f.Name]; !there || old != f {
			names = append(names, f.Name)
		}
		delete(before, f.Name)
	}
	for _, f := range was {
		if _, gone := before[f.Name]; gone {
			names = append(names, f.Name)
		}
	}
	switch len(names) {
	case 0:
		return ""
	case 1:
		return fmt.Sprintf("the %s %s was changed", what, names[0])
	}
	const named = 3
	list := strings.Join(names[:min(named, len(names))], ", ")
	if len(names) > named {
		list += " and others"
	}
	return fmt.Sprintf("%d %ss were changed (%s)", len(names), what, list)
}
