package main

import (
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"sort"
	"strings"

	"poise/netlist"
)

const suffix = ".poise"

// find turns paths into files: a file stands for itself, a folder (with /... or without) for all .poise files below it.
func find(paths []string) ([]string, error) {
	if len(paths) == 0 {
		paths = []string{"."}
	}
	var files []string
	seen := map[string]bool{}
	add := func(f string) {
		if !seen[f] {
			seen[f] = true
			files = append(files, f)
		}
	}
	for _, p := range paths {
		folder := strings.TrimSuffix(strings.TrimSuffix(p, "..."), "/")
		if folder == "" {
			folder = "."
		}
		info, err := os.Stat(folder)
		if err != nil {
			return nil, fmt.Errorf("%s: there is no such file or folder", p)
		}
		if !info.IsDir() {
			add(filepath.ToSlash(folder))
			continue
		}
		below, err := below(folder)
		if err != nil {
			return nil, err
		}
		if len(below) == 0 {
			return nil, fmt.Errorf("%s: no %s file in this folder", p, suffix)
		}
		for _, f := range below {
			add(f)
		}
	}
	return files, nil
}

// below lists the .poise files of a folder, sorted; folders that begin with a dot are left out.
func below(folder string) ([]string, error) {
	var files []string
	err := filepath.WalkDir(folder, func(p string, d fs.DirEntry, err error) error {
		switch {
		case err != nil:
			return err
		case d.IsDir() && p != folder && strings.HasPrefix(d.Name(), "."):
			return filepath.SkipDir
		case !d.IsDir() && strings.HasSuffix(p, suffix):
			files = append(files, filepath.ToSlash(p))
		}
		return nil
	})
	sort.Strings(files)
	return files, err
}

// load reads a design. Files it uses lie below root: the folder given, else the working folder if the file is below it, else the
// file's own folder.
func load(file, root string) (*netlist.Design, error) {
	relative := filepath.ToSlash(filepath.Clean(file))
	if root == "" {
		root = "."
		if filepath.IsAbs(file) || strings.HasPrefix(relative, "../") {
			root, relative = filepath.Dir(file), filepath.Base(file)
		}
	} else {
		r, err := filepath.Rel(root, file)
		if err != nil || strings.HasPrefix(r, "..") {
			return nil, fmt.Errorf("%s is not below the folder %s", file, root)
		}
		relative = filepath.ToSlash(r)
	}
	return netlist.Load(os.DirFS(root), relative)
}

// create writes a file at once or not at all.
func create(name string, f func(*os.File) error) (err error) {
	t, err := os.CreateTemp(filepath.Dir(name), ".poise-*")
	if err != nil {
		return err
	}
	defer func() {
		if err != nil {
			t.Close()
			os.Remove(t.Name())
		}
	}()
	if err = f(t); err != nil {
		return err
	}
	if err = t.Chmod(0o644); err != nil {
		return err
	}
	if err = t.Close(); err != nil {
		return err
	}
	return os.Rename(t.Name(), name)
}
