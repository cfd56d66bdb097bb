package outfile

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"syscall"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

func list(t *testing.T) (names []string) {
	entries, err := os.ReadDir(".")
	require.NoError(t, err)
	for _, e := range entries {
		names = append(names, e.Name())
	}
	return names
}

func read(t *testing.T, name string) string {
	text, err := os.ReadFile(name)
	require.NoError(t, err)
	return string(text)
}

func create(t *testing.T, name, text string) *File {
	f, err := Create(name)
	require.NoError(t, err)
	_, err = f.Write([]byte(text))
	require.NoError(t, err)
	return f
}

func TestWholeOrNotAtAll(t *testing.T) {
	t.Chdir(t.TempDir())
	f := create(t, "a", "new")
	assert.NotContains(t, list(t), "a", "not before Commit")
	assert.Nil(t, f.Device())
	require.NoError(t, Commit(f))
	assert.Equal(t, []string{"a"}, list(t))
	assert.Equal(t, "new", read(t, "a"))
	f.Discard()
	assert.Equal(t, "new", read(t, "a"))

	f = create(t, "a", "newer")
	assert.Equal(t, "new", read(t, "a"))
	f.Discard()
	f.Discard()
	assert.Equal(t, []string{"a"}, list(t))
	assert.Equal(t, "new", read(t, "a"))

	require.NoError(t, Commit(create(t, "a", "newer"), create(t, "b", "too")))
	assert.Equal(t, "newer", read(t, "a"))
	assert.Equal(t, "too", read(t, "b"))
	require.NoError(t, Commit())
}

// TestAllOrNone: when the second file cannot be completed the first does not
// appear either.
func TestAllOrNone(t *testing.T) {
	t.Chdir(t.TempDir())
	a, b := create(t, "a", "1"), create(t, "b", "2")
	require.NoError(t, b.file.Close())
	err := Commit(a, b)
	require.ErrorIs(t, err, fs.ErrClosed)
	assert.Equal(t, "b: cannot be written: file already closed; write it somewhere else", err.Error())
	assert.Empty(t, list(t))
}

// TestFirstErrorStays when a writer above goes on.
func TestFirstErrorStays(t *testing.T) {
	t.Chdir(t.TempDir())
	f, err := Create("a")
	require.NoError(t, err)
	require.NoError(t, f.file.Close())
	_, first := f.Write(make([]byte, 2*bufferSize))
	require.Error(t, first)
	_, again := f.Write([]byte("x"))
	assert.Equal(t, first, again)
	assert.Equal(t, first, f.Err())
	f.Discard()
	assert.Empty(t, list(t))
}

func TestPermissionsAndLinksStay(t *testing.T) {
	t.Chdir(t.TempDir())
	require.NoError(t, os.WriteFile("real", []byte("old"), 0o600))
	require.NoError(t, os.Symlink("real", "link"))
	require.NoError(t, Commit(create(t, "link", "new")))
	assert.Equal(t, "new", read(t, "real"))
	info, err := os.Lstat("link")
	require.NoError(t, err)
	assert.NotZero(t, info.Mode()&fs.ModeSymlink)
	info, err = os.Stat("real")
	require.NoError(t, err)
	assert.Equal(t, fs.FileMode(0o600), info.Mode())
}

func TestLongName(t *testing.T) {
	t.Chdir(t.TempDir())
	name := string(make([]byte, 0, 255))
	for len(name) < 255 { // the longest name that usual file systems take
		name += "n"
	}
	require.NoError(t, Commit(create(t, name, "x")))
	assert.Equal(t, []string{name}, list(t))
}

func TestErrors(t *testing.T) {
	t.Chdir(t.TempDir())
	_, err := Create(".")
	assert.EqualError(t, err, ".: is a directory; name a file in it")
	_, err = Create("none/a")
	require.ErrorIs(t, err, fs.ErrNotExist)
	assert.Contains(t, err.Error(), "; make the directory none first")
	require.NoError(t, os.WriteFile("file", nil, 0o644))
	_, err = Create(filepath.Join("file", "a"))
	require.Error(t, err)
	assert.Equal(t, []string{"file"}, list(t))

	f := &File{path: "a"}
	assert.EqualError(t, f.explain(&fs.PathError{Op: "open", Path: "a", Err: syscall.EACCES}),
		"a: cannot be written: permission denied; check the permissions or write it somewhere else")
	assert.EqualError(t, f.explain(&os.LinkError{Op: "rename", Old: "x", New: "a", Err: syscall.ENOSPC}),
		"a: cannot be written: no space left on device; free some space or write it somewhere else")
	assert.True(t, errors.Is(f.explain(syscall.ENOSPC), syscall.ENOSPC))
	assert.NoError(t, f.explain(nil))
}

func TestSame(t *testing.T) {
	t.Chdir(t.TempDir())
	require.NoError(t, os.WriteFile("a", nil, 0o644))
	require.NoError(t, os.Link("a", "b"))
	require.NoError(t, os.WriteFile("c", nil, 0o644))
	assert.True(t, Same("a", "./a"))
	assert.True(t, Same("a", "b"))
	assert.False(t, Same("a", "c"))
	assert.False(t, Same("none", "none"))
}
