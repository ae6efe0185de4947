package main

import (
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"syscall"

	"github.com/rogpeppe/go-internal/testscript"
)

// The commands of testdata/*.txtar besides those of testscript.
//
//	tiny                        copies the tiny night here: profile.yaml, target.yaml,
//	                            scene.yaml, seq/, night/
//	exitcode N CMD ARG...       runs CMD and checks the exit code that a shell sees
//	fails N REGEXP CMD ARG...   exitcode, and standard error is one plain sentence that
//	                            matches; standard output is empty unless N is 3
//	left NAME...                this folder holds these names and no other
//	json                        standard output of the last command is one JSON object
//	card FILE KEY OLD NEW       changes the text of a card's value in place
//	disk DIR SIZE [ro]          mounts a file system in memory, where [mount] is true
func scriptCommands(root string) map[string]func(ts *testscript.TestScript, neg bool, args []string) {
	return map[string]func(ts *testscript.TestScript, neg bool, args []string){
		"tiny": func(ts *testscript.TestScript, _ bool, _ []string) {
			from, err := tinyNight(root)
			ts.Check(err)
			ts.Check(os.CopyFS(ts.MkAbs("."), os.DirFS(from)))
		},
		"exitcode": exitCodeIs,
		"fails":    failsWith,
		"left":     onlyLeft,
		"json":     oneObject,
		"card":     changeCard,
		"disk":     mountDisk,
	}
}

// exitCodeIs runs `exitcode N COMMAND ARG...`; standard output and error stay
// there for `stdout` and `stderr`.
func exitCodeIs(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 {
		ts.Fatalf("usage: exitcode N COMMAND [ARG...]")
	}
	want, err := strconv.Atoi(args[0])
	ts.Check(err)
	if got := exitOf(ts, args[1], args[2:]); got != want {
		ts.Fatalf("exit code %d, want %d", got, want)
	}
}

func exitOf(ts *testscript.TestScript, name string, args []string) int {
	err := ts.Exec(name, args...)
	var exit *exec.ExitError
	switch {
	case err == nil:
		return 0
	case errors.As(err, &exit):
		return exit.ExitCode()
	}
	ts.Fatalf("%s: %v", name, err)
	return -1
}

// failsWith is `fails N REGEXP COMMAND ARG...`.
func failsWith(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 3 {
		ts.Fatalf("usage: fails N REGEXP COMMAND [ARG...]")
	}
	exitCodeIs(ts, false, append([]string{args[0]}, args[2:]...))
	stdout, stderr := ts.ReadFile("stdout"), ts.ReadFile("stderr")
	if stdout != "" && args[0] != strconv.Itoa(exitDegraded) {
		ts.Fatalf("an error leaves standard output empty, not %q", stdout)
	}
	sentence, whole := strings.CutSuffix(stderr, "\n")
	if !whole || strings.Contains(sentence, "\n") || !strings.HasPrefix(sentence, "mirrorloom: ") {
		ts.Fatalf("standard error is not one sentence of mirrorloom: %q", stderr)
	}
	if !regexp.MustCompile(args[1]).MatchString(sentence) {
		ts.Fatalf("the sentence does not match %q: %s", args[1], sentence)
	}
}

// onlyLeft is `left NAME...`.
func onlyLeft(ts *testscript.TestScript, neg bool, args []string) {
	entries, err := os.ReadDir(ts.MkAbs("."))
	ts.Check(err)
	var names []string
	for _, e := range entries {
		if e.Name() != ".tmp" { // testscript's own
			names = append(names, e.Name())
		}
	}
	slices.Sort(args)
	if neg || !slices.Equal(names, args) {
		ts.Fatalf("here lie %q, not %q", names, args)
	}
}

// oneObject is `json`.
func oneObject(ts *testscript.TestScript, neg bool, _ []string) {
	dec := json.NewDecoder(strings.NewReader(ts.ReadFile("stdout")))
	var object map[string]any
	if err := dec.Decode(&object); err != nil || neg || len(object) == 0 {
		ts.Fatalf("standard output is no JSON object: %v", err)
	}
	if _, err := dec.Token(); err != io.EOF {
		ts.Fatalf("something follows the JSON object: %v", err)
	}
}

// changeCard is `card FILE KEY OLD NEW`; OLD and NEW are equally long.
func changeCard(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) != 4 || len(args[2]) != len(args[3]) {
		ts.Fatalf("usage: card FILE KEY OLD NEW, OLD and NEW equally long")
	}
	text := ts.ReadFile(args[0])
	at := strings.Index(text, (args[1] + "        ")[:8]+"= ")
	if at < 0 || at%80 != 0 {
		ts.Fatalf("%s has no card %s", args[0], args[1])
	}
	card := text[at : at+80]
	if strings.Count(card, args[2]) != 1 {
		ts.Fatalf("card %q does not hold %q once", card, args[2])
	}
	changed := text[:at] + strings.Replace(card, args[2], args[3], 1) + text[at+80:]
	ts.Check(os.WriteFile(ts.MkAbs(args[0]), []byte(changed), 0o644))
}

// mountDisk is `disk DIR SIZE [ro]`. With ro the file system is empty.
func mountDisk(ts *testscript.TestScript, neg bool, args []string) {
	if neg || len(args) < 2 {
		ts.Fatalf("usage: disk DIR SIZE [ro]")
	}
	flags := uintptr(0)
	if len(args) > 2 {
		flags = syscall.MS_RDONLY
	}
	dir := ts.MkAbs(args[0])
	ts.Check(os.MkdirAll(dir, 0o755))
	ts.Check(syscall.Mount("tmpfs", dir, "tmpfs", flags, "size="+args[1]))
	ts.Defer(func() { _ = syscall.Unmount(dir, syscall.MNT_DETACH) })
}

// condition knows [mount]: whether this process may mount file systems. Under
// CI=true it must.
func condition(name string) (bool, error) {
	if name != "mount" {
		return false, fmt.Errorf("unknown condition %s", name)
	}
	dir, err := os.MkdirTemp("", "mirrorloom-mount")
	if err != nil {
		return false, err
	}
	defer os.Remove(dir)
	if err := syscall.Mount("tmpfs", dir, "tmpfs", 0, "size=64k"); err != nil {
		if os.Getenv("CI") == "true" {
			return false, fmt.Errorf("a file system cannot be mounted, and under CI=true a check may not be skipped: %w", err)
		}
		return false, nil
	}
	return true, syscall.Unmount(dir, 0)
}
