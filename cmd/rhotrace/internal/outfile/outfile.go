// Package outfile writes files that appear whole or not at all: what is written
// goes to a temporary file in the same directory, which takes the place of the
// target in one step when all of it is on disk.
package outfile

import (
	"bufio"
	"errors"
	"fmt"
	"io/fs"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"syscall"
)

// File is a file in the making. Everything written to it is lost unless Commit
// succeeds.
type File struct {
	path   string // as the user wrote it
	target string // what is replaced, links resolved; empty for a device or a pipe
	file   *os.File
	buffer *bufio.Writer
	err    error // the first error of Write
}

// Create prepares to write path. A path that cannot be written is found now,
// not at the end. A device or a pipe (/dev/null, /dev/stdout) is written as it
// is. The error says what is wrong, where, and what to do.
func Create(path string) (*File, error) {
	f := &File{path: path, target: path}
	if resolved, err := filepath.EvalSymlinks(path); err == nil {
		f.target = resolved
	}
	info, err := os.Stat(f.target)
	switch {
	case err != nil && !errors.Is(err, fs.ErrNotExist):
		return nil, f.explain(err)
	case err == nil && info.IsDir():
		return nil, f.explain(syscall.EISDIR)
	case err == nil:
		// Renaming needs no leave to write the file that is replaced: ask for it.
		old, err := os.OpenFile(f.target, os.O_WRONLY, 0)
		if err != nil {
			return nil, f.explain(err)
		}
		if !info.Mode().IsRegular() {
			f.target, f.file, f.buffer = "", old, bufio.NewWriterSize(old, bufferSize)
			return f, nil
		}
		if err := old.Close(); err != nil {
			return nil, f.explain(err)
		}
	}
	if err := f.openTemporary(); err != nil {
		return nil, f.explain(err)
	}
	if info != nil {
		if err := f.file.Chmod(info.Mode().Perm()); err != nil {
			f.Discard()
			return nil, f.explain(err)
		}
	}
	return f, nil
}

const bufferSize = 64 << 10

// openTemporary opens a new hidden file beside the target, with the
// permissions that a new file gets.
func (f *File) openTemporary() error {
	dir, base := filepath.Split(f.target)
	if len(base) > 100 {
		base = base[:100] // names of files have a largest length
	}
	for {
		name := filepath.Join(dir, "."+base+"."+strconv.FormatUint(rand.Uint64(), 36))
		file, err := os.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
		if errors.Is(err, fs.ErrExist) {
			continue
		}
		if err == nil {
			f.file, f.buffer = file, bufio.NewWriterSize(file, bufferSize)
		}
		return err
	}
}

// Device is the open file when path is a device or a pipe, else nil.
func (f *File) Device() *os.File {
	if f.target == "" {
		return f.file
	}
	return nil
}

// Write implements io.Writer.
func (f *File) Write(p []byte) (int, error) {
	n, err := f.buffer.Write(p)
	if err != nil && f.err == nil {
		f.err = f.explain(err)
	}
	return n, f.err
}

// Err is the first error of Write, without what a writer above has put round it.
func (f *File) Err() error { return f.err }

// Discard drops what was written. It does nothing after Commit.
func (f *File) Discard() {
	if f.file == nil {
		return
	}
	f.file.Close()
	if f.target != "" {
		os.Remove(f.file.Name())
	}
	f.file = nil
}

// Commit puts the files on disk and then in their places. When one of them
// cannot be completed none appears.
func Commit(files ...*File) error {
	defer func() {
		for _, f := range files {
			f.Discard()
		}
	}()
	for _, f := range files {
		if err := f.complete(); err != nil {
			return f.explain(err)
		}
	}
	for _, f := range files {
		if f.target == "" {
			f.file = nil
			continue
		}
		if err := os.Rename(f.file.Name(), f.target); err != nil {
			return f.explain(err)
		}
		f.file = nil
	}
	return nil
}

// complete writes out what is buffered and closes the file.
func (f *File) complete() error {
	if err := f.buffer.Flush(); err != nil {
		return err
	}
	if f.target != "" {
		if err := f.file.Sync(); err != nil {
			return err
		}
	}
	return f.file.Close()
}

// explain words an error of the operating system.
func (f *File) explain(err error) error {
	if err == nil {
		return nil
	}
	var path *fs.PathError
	var link *os.LinkError
	switch {
	case errors.As(err, &path):
		err = path.Err
	case errors.As(err, &link):
		err = link.Err
	}
	advice := "write it somewhere else"
	switch {
	case errors.Is(err, syscall.EISDIR):
		return fmt.Errorf("%s: is a directory; name a file in it", f.path)
	case errors.Is(err, fs.ErrNotExist):
		advice = "make the directory " + filepath.Dir(f.path) + " first"
	case errors.Is(err, fs.ErrPermission):
		advice = "check the permissions or " + advice
	case errors.Is(err, syscall.ENOSPC):
		advice = "free some space or " + advice
	}
	return fmt.Errorf("%s: cannot be written: %w; %s", f.path, err, advice)
}

// Same reports whether two paths lead to one file that exists.
func Same(a, b string) bool {
	first, err := os.Stat(a)
	if err != nil {
		return false
	}
	second, err := os.Stat(b)
	return err == nil && os.SameFile(first, second)
}
