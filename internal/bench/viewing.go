package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"time"

	"mirrorloom/internal/child"
)

// What `view` is to reach on a cube of 1.7 GB.
const (
	mostFirstPicture = 500 * time.Millisecond
	mostClick        = 100 * time.Millisecond
	mostViewMemory   = 200 << 20
)

// clicks are places of a circle of clickArcsec.
const (
	clicks      = 20
	clickArcsec = 2.5
)

// viewed is what was measured of one cube.
type viewed struct {
	first, kept   time.Duration // from the program's start
	early, click  time.Duration // medians: before the cache was made, and after
	slowest, busy time.Duration // of a click after; busy is the processor's time of one
	peakBytes     int64
	cubeBytes     int64
	cacheBytes    int64
}

// viewing looks at cubes of 255 frames of 1024 x 1024 as a browser does.
func viewing(ctx context.Context, s *session) (string, error) {
	var b strings.Builder
	fmt.Fprintf(&b, `The program %[1]s is started on a cube and asked over HTTP: first for white light, then, when its cache is made, for the
spectra of %[2]d circles of %[3]g arcsec, with the errors that decoding correlates. Cube and cache are in the page cache as far
as the machine keeps them. The peak is ru_maxrss, making the cache included.

| cube | cube, cache (GB) | first picture | cache made | a click before | a click: median, slowest, processor | peak | to reach | verdict |
| --- | --- | --- | --- | --- | --- | --- | --- | --- |
`, "`view`", clicks, clickArcsec)
	for _, c := range []struct {
		what, recipe string
		night        nightPlan
	}{
		{"steady", "nominal", simple},
		{"drifting, throughput measured", withoutLamps, nightPlan{name: "drifting", options: append(slices.Clone(perfect), "--fault", "drift=0.02")}},
	} {
		v, err := viewNight(ctx, s, c.night, c.recipe)
		if err != nil {
			return "", err
		}
		reached := v.first <= mostFirstPicture && v.click <= mostClick && v.peakBytes <= mostViewMemory
		fmt.Fprintf(&b, "| %s | %.2f, %.2f | %.0f ms | %.1f s | %.0f ms | %.0f ms, %.0f ms, %.0f ms | %.0f MiB | %.0f ms, %.0f ms, %d MiB | %s |\n",
			c.what, float64(v.cubeBytes)/1e9, float64(v.cacheBytes)/1e9, ms(v.first), v.kept.Seconds(), ms(v.early),
			ms(v.click), ms(v.slowest), ms(v.busy), float64(v.peakBytes)/(1<<20), ms(mostFirstPicture), ms(mostClick), mostViewMemory>>20, judged(reached))
	}
	return b.String(), nil
}

func ms(d time.Duration) float64 { return d.Seconds() * 1e3 }

// viewNight reduces a night and looks at its cube.
func viewNight(ctx context.Context, s *session, p nightPlan, recipe string) (v viewed, err error) {
	n, err := s.nights.make(ctx, p)
	if err != nil {
		return v, err
	}
	if recipe, err = recipeFile(s.dir, recipe); err != nil {
		return v, err
	}
	run := filepath.Join(s.dir, "run")
	if _, err := child.Run(ctx, program, "reduce", n.frames, "--sequence", n.sequence, "--recipe", recipe, "--memory", workersMemory, "-o", run, "--replace"); err != nil {
		return v, err
	}
	info, err := os.Stat(filepath.Join(run, "cube.fits"))
	if err != nil {
		return v, err
	}
	v, err = look(ctx, run)
	v.cubeBytes = info.Size()
	return v, err
}

// look starts view on a run and asks it.
func look(ctx context.Context, run string) (v viewed, err error) {
	cmd := exec.CommandContext(ctx, program, "view", run, "--json")
	cmd.Env = child.Environment()
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	stdout, err := cmd.StdoutPipe()
	if err != nil {
		return v, err
	}
	start := time.Now()
	if err := cmd.Start(); err != nil {
		return v, err
	}
	err = v.ask(ctx, start, stdout, cmd.Process.Pid)
	err = errors.Join(err, cmd.Process.Signal(syscall.SIGINT))
	if wait := cmd.Wait(); wait != nil {
		err = errors.Join(err, fmt.Errorf("view %s: %w: %s", run, wait, strings.TrimSpace(stderr.String())))
	}
	if err != nil {
		return v, err
	}
	const bytesPerUnit = 1024 // getrusage(2): kilobytes
	v.peakBytes = cmd.ProcessState.SysUsage().(*syscall.Rusage).Maxrss * bytesPerUnit
	return v, nil
}

// ask measures what a browser would wait for.
func (v *viewed) ask(ctx context.Context, start time.Time, stdout io.Reader, pid int) error {
	var started struct{ URL string }
	if err := json.NewDecoder(stdout).Decode(&started); err != nil {
		return fmt.Errorf("view prints no address: %w", err)
	}
	var run struct{ Elements, Rows int }
	if err := fetch(ctx, started.URL+"api/run", &run); err != nil {
		return err
	}
	if err := fetch(ctx, started.URL+"api/picture?layer=signal&sampled=1", nil); err != nil {
		return err
	}
	v.first = time.Since(start)
	circle := func(i int) string {
		return fmt.Sprintf("%sapi/spectrum?shape=circle&j=%d&y=%d&r_arcsec=%g", started.URL,
			run.Elements/8+i*run.Elements*3/(4*clicks), run.Rows/8+i*7%clicks*run.Rows*3/(4*clicks), clickArcsec)
	}
	early, err := timed(ctx, 3, circle)
	if err != nil {
		return err
	}
	v.early = early[len(early)/2]
	for {
		var p struct {
			State, Note string
			Bytes       int64
		}
		if err := fetch(ctx, started.URL+"api/progress", &p); err != nil {
			return err
		}
		if p.State == "ready" {
			v.kept, v.cacheBytes = time.Since(start), p.Bytes
			break
		}
		if p.State != "making" {
			return fmt.Errorf("view keeps no cache: %s", p.Note)
		}
		time.Sleep(100 * time.Millisecond)
	}
	before, err := processor(pid)
	if err != nil {
		return err
	}
	all, err := timed(ctx, clicks, circle)
	if err != nil {
		return err
	}
	after, err := processor(pid)
	v.click, v.slowest, v.busy = all[len(all)/2], all[len(all)-1], (after-before)/clicks
	return err
}

// timed asks n times and gives the times in ascending order.
func timed(ctx context.Context, n int, target func(i int) string) ([]time.Duration, error) {
	var all []time.Duration
	for i := range n {
		start := time.Now()
		if err := fetch(ctx, target(i), nil); err != nil {
			return nil, err
		}
		all = append(all, time.Since(start))
	}
	slices.Sort(all)
	return all, nil
}

// fetch reads an answer whole, as JSON where to is not nil.
func fetch(ctx context.Context, target string, to any) error {
	r, err := http.NewRequestWithContext(ctx, http.MethodGet, target, nil)
	if err != nil {
		return err
	}
	answer, err := http.DefaultClient.Do(r)
	if err != nil {
		return err
	}
	defer answer.Body.Close()
	text, err := io.ReadAll(answer.Body)
	if err != nil {
		return err
	}
	if answer.StatusCode != http.StatusOK {
		return fmt.Errorf("%s: %s: %s", target, answer.Status, text)
	}
	if to == nil {
		return nil
	}
	return json.Unmarshal(text, to)
}

// processor is the time that a process has had: proc(5), stat, fields 14 and 15.
func processor(pid int) (time.Duration, error) {
	text, err := os.ReadFile(fmt.Sprintf("/proc/%d/stat", pid))
	if err != nil {
		return 0, err
	}
	_, rest, _ := strings.Cut(string(text), ") ")
	fields := strings.Fields(rest)
	var user, system int64
	if len(fields) < 13 {
		return 0, fmt.Errorf("/proc/%d/stat has %d fields", pid, len(fields))
	}
	if _, err := fmt.Sscan(fields[11]+" "+fields[12], &user, &system); err != nil {
		return 0, err
	}
	const perSecond = 100 // USER_HZ, 100 on every Linux that Go runs on
	return time.Duration(user+system) * time.Second / perSecond, nil
}
