// Package configs carries the YAML files that mirrorloom knows by name.
//
// A folder is a kind of configuration: profiles (instruments), targets, scenes
// and recipes. The name of a configuration is its file name without ".yaml".
// The files are embedded in the binary, so that a name works wherever the
// program runs; they are plain text for people too, and their comments explain
// the choices. This package knows no meaning: who reads a folder checks it.
package configs

import (
	"embed"
	"fmt"
	"io/fs"
	"path"
	"strings"
)

// The pattern takes whatever lies one folder down, so that a folder may come
// or go, and CSV files may lie beside the YAML that names them, without an
// edit here. Only *.yaml files have names.
//
//go:embed */*
var files embed.FS

const suffix = ".yaml"

// Folder names of the kinds of configuration.
const (
	Profiles = "profiles"
	Targets  = "targets"
	Scenes   = "scenes"
	Recipes  = "recipes"
)

// Names lists the embedded configurations of a folder in alphabetical order.
// A folder that does not exist has none.
func Names(folder string) []string {
	entries, err := files.ReadDir(folder)
	if err != nil {
		return nil
	}
	var names []string
	for _, e := range entries { // ReadDir sorts by file name
		if name, ok := strings.CutSuffix(e.Name(), suffix); ok && !e.IsDir() {
			names = append(names, name)
		}
	}
	return names
}

// Read returns the text of the embedded configuration called name. The error
// wraps fs.ErrNotExist when there is none.
func Read(folder, name string) ([]byte, error) {
	return ReadFile(folder, name+suffix)
}

// ReadFile returns an embedded file of a folder by its whole name, such as a
// CSV file beside the configuration that names it. The error wraps
// fs.ErrNotExist when there is none.
func ReadFile(folder, name string) ([]byte, error) {
	if strings.ContainsAny(name, `/\`) {
		return nil, fmt.Errorf("embedded %s/%s: %w", folder, name, fs.ErrNotExist)
	}
	data, err := files.ReadFile(path.Join(folder, name))
	if err != nil {
		return nil, fmt.Errorf("embedded %s/%s: %w", folder, name, fs.ErrNotExist)
	}
	return data, nil
}
