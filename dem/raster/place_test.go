package raster

import (
	"context"
	"os"
	"os/exec"
	"os/signal"
	"path/filepath"
	"runtime"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"foldshade/dem"
)

// assertOutput checks that an error is an *OutputError about a path, with a
// text.
func assertOutput(t *testing.T, err error, path, text string) {
	t.Helper()
	var out *OutputError
	if assert.ErrorAs(t, err, &out) {
		assert.Equal(t, path, out.Path)
		assert.Contains(t, out.Text, text)
		assert.NotContains(t, err.Error(), "\n")
	}
}

// fillSet writes two layers and a file, all but the last step.
func fillSet(t *testing.T, s *Set) error {
	t.Helper()
	win := dem.Window{Row: 0, Col: 0, Rows: 60, Cols: 70}
	g := utmGrid(t, 60, 70)
	c, err := s.Writer("a", classLayer(), g, win)
	if err != nil {
		return err
	}
	f, err := s.Writer("b", floatLayer(), g, win)
	if err != nil {
		return err
	}
	j, err := s.File("a/item.json")
	if err != nil {
		return err
	}
	if _, err := j.Write([]byte("{}\n")); err != nil {
		return err
	}
	if err := c.WriteBytes(win, make([]uint8, 60*70)); err != nil {
		return err
	}
	return f.WriteFloats(win, 0, smooth(60, 70))
}

var fullSet = []string{"a", "a/item.json", "a/sea.tif", "a/sea.tif.aux.xml", "b", "b/height.tif"}

func put(t *testing.T, path, text string) {
	t.Helper()
	require.NoError(t, os.MkdirAll(filepath.Dir(path), 0o777))
	require.NoError(t, os.WriteFile(path, []byte(text), 0o666))
}

func TestCommitMakesTheFolder(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "out")
	s, err := NewSet(dir, false, nil)
	require.NoError(t, err)
	require.NoError(t, fillSet(t, s))
	var most, all atomic.Int64
	s.Progress = func(done, of int64) {
		most.Store(max(most.Load(), done))
		all.Store(of)
	}
	for _, name := range listing(t, dir) {
		assert.Equal(t, byte('.'), name[0], "%s is visible before commit", name)
	}
	require.NoError(t, s.Commit())
	assert.Equal(t, int64(60*70*5), all.Load(), "a byte and a float32 a cell")
	assert.Equal(t, all.Load(), most.Load())
	assert.Equal(t, fullSet, listing(t, dir))
	s.Abort()
	assert.Equal(t, fullSet, listing(t, dir), "abort after commit changes nothing")
}

func TestAbortLeavesNothing(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "out")
	s, err := NewSet(dir, false, nil)
	require.NoError(t, err)
	require.NoError(t, fillSet(t, s))
	require.NoError(t, s.Finish(context.Background()))
	s.Abort()
	assert.NoDirExists(t, dir)
}

func TestFinishEndsWithContext(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "out")
	s, err := NewSet(dir, false, nil)
	require.NoError(t, err)
	require.NoError(t, fillSet(t, s))
	ctx, cancel := context.WithCancel(context.Background())
	cancel()
	assert.ErrorIs(t, s.Finish(ctx), context.Canceled)
	s.Abort()
	assert.NoDirExists(t, dir)
}

// TestAbortWhileWriting gives up while GDAL writes: nothing may be left then,
// nor come back when GDAL is done. On a machine so busy that the raster is
// finished first, the abort has to remove that.
func TestAbortWhileWriting(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "out")
	s, err := NewSet(dir, false, nil)
	require.NoError(t, err)
	g := utmGrid(t, 2000, 2000)
	w, err := s.Writer("a", floatLayer(), g, g.Whole())
	require.NoError(t, err)
	writeFloats(t, w, g.Whole(), smooth(2000, 2000))
	ctx, cancel := context.WithCancel(context.Background())
	go func() {
		for range 10000 {
			if _, err := os.Stat(w.path); err == nil {
				break
			}
			time.Sleep(time.Millisecond)
		}
		cancel()
	}()
	if err := s.Finish(ctx); err != nil {
		assert.ErrorIs(t, err, context.Canceled)
	}
	s.Abort()
	assert.NoDirExists(t, dir)
	w.mu.Lock() // held until GDAL is done
	defer w.mu.Unlock()
	assert.NoDirExists(t, dir)
}

// TestRefusals holds the output places that a run must refuse, each of which
// leaves the folder as it was.
func TestRefusals(t *testing.T) {
	cases := []struct {
		name      string
		overwrite bool
		inputs    []string // below the temporary folder
		prepare   func(t *testing.T, top string)
		out       string // below the temporary folder
		path      string // named in the error
		text      string
	}{
		{"existing raster", false, nil, func(t *testing.T, top string) { put(t, top+"/out/b/height.tif", "old") },
			"out", "out/b/height.tif", "already exists"},
		{"existing json", false, nil, func(t *testing.T, top string) { put(t, top+"/out/a/item.json", "old") },
			"out", "out/a/item.json", "already exists"},
		{"stale sidecar", false, nil, func(t *testing.T, top string) { put(t, top+"/out/b/height.tif.ovr", "old") },
			"out", "out/b/height.tif.ovr", "already exists"},
		{"dangling link", false, nil, func(t *testing.T, top string) {
			put(t, top+"/out/b/x", "")
			require.NoError(t, os.Symlink("nowhere", top+"/out/b/height.tif"))
		}, "out", "out/b/height.tif", "already exists"},
		{"folder under the final name", true, nil, func(t *testing.T, top string) { put(t, top+"/out/b/height.tif/x", "") },
			"out", "out/b/height.tif", "is a folder"},
		{"file in place of the look's folder", true, nil, func(t *testing.T, top string) { put(t, top+"/out/b", "old") },
			"out", "out/b/height.tif", "is a file, not a folder"},
		{"missing parent", false, nil, func(*testing.T, string) {}, "none/out", "none/out", "does not exist"},
		{"output is a file", true, nil, func(t *testing.T, top string) { put(t, top+"/out", "old") }, "out", "out", "is a file"},
		{"parent is a file", true, nil, func(t *testing.T, top string) { put(t, top+"/f", "old") }, "f/out", "f/out", "is a file"},
		{"output is the input", true, []string{"out/b/height.tif"}, func(t *testing.T, top string) { put(t, top+"/out/b/height.tif", "dem") },
			"out", "out/b/height.tif", "is the input"},
		{"output is the input through a link", true, []string{"link.tif"}, func(t *testing.T, top string) {
			put(t, top+"/out/b/height.tif", "dem")
			require.NoError(t, os.Symlink("out/b/height.tif", top+"/link.tif"))
		}, "out", "out/b/height.tif", "is the input"},
		{"output folder is a link to the input's", true, []string{"real/b/height.tif"}, func(t *testing.T, top string) {
			put(t, top+"/real/b/height.tif", "dem")
			require.NoError(t, os.Symlink("real", top+"/out"))
		}, "out", "out/b/height.tif", "is the input"},
		{"output is listed by the input's list", true, []string{"two.vrt"}, func(t *testing.T, top string) {
			put(t, top+"/out/a/sea.tif", "dem")
			put(t, top+"/one.vrt", `<VRTDataset><VRTRasterBand><SimpleSource><SourceFilename relativeToVRT="1">out/a/sea.tif</SourceFilename></SimpleSource></VRTRasterBand></VRTDataset>`)
			put(t, top+"/two.vrt", `<VRTDataset><VRTRasterBand><ComplexSource><SourceFilename relativeToVRT="0">`+top+`/one.vrt</SourceFilename></ComplexSource></VRTRasterBand></VRTDataset>`)
		}, "out", "out/a/sea.tif", "is the input"},
	}
	for _, c := range cases {
		t.Run(c.name, func(t *testing.T) {
			top := t.TempDir()
			c.prepare(t, top)
			before := listing(t, top)
			var inputs []string
			for _, in := range c.inputs {
				inputs = append(inputs, filepath.Join(top, in))
			}
			s, err := NewSet(filepath.Join(top, c.out), c.overwrite, inputs)
			if err == nil {
				err = fillSet(t, s)
				s.Abort()
			}
			assertOutput(t, err, filepath.Join(top, c.path), c.text)
			assert.Equal(t, before, listing(t, top))
		})
	}
}

func TestNamesStayInside(t *testing.T) {
	s, dir := newSet(t)
	defer s.Abort()
	for _, name := range []string{"../x.json", "/x.json", "a/../../x.json", ".hidden", "a/.hidden", ""} {
		_, err := s.File(name)
		assertOutput(t, err, filepath.Join(dir, name), "must stay inside")
	}
	_, err := s.File("x.json")
	require.NoError(t, err)
	_, err = s.File("x.json")
	assertOutput(t, err, filepath.Join(dir, "x.json"), "twice")
}

func TestFileBehind(t *testing.T) {
	top := t.TempDir()
	put(t, top+"/a.zip", "zip")
	for name, want := range map[string]string{
		top + "/a.zip":                         top + "/a.zip",
		"/vsizip/" + top + "/a.zip/in/b.tif":   top + "/a.zip",
		"/vsizip/{" + top + "/a.zip}/in/b.tif": top + "/a.zip",
	} {
		path, info := fileBehind(name)
		require.NotNil(t, info, name)
		assert.Equal(t, want, filepath.Clean(path), name)
	}
	_, info := fileBehind("/vsicurl/https://example.org/a.tif")
	assert.Nil(t, info)
}

// TestOverwrite replaces files, and removes the sidecars of those replaced.
func TestOverwrite(t *testing.T) {
	dir := t.TempDir()
	for _, name := range []string{"a/sea.tif", "a/item.json", "b/height.tif", "b/height.tif.aux.xml", "b/height.tif.ovr", "b/other"} {
		put(t, filepath.Join(dir, name), "old")
	}
	s, err := NewSet(dir, true, nil)
	require.NoError(t, err)
	require.NoError(t, fillSet(t, s))
	require.NoError(t, s.Commit())
	assert.ElementsMatch(t, append([]string{"b/other"}, fullSet...), listing(t, dir))
	text, err := os.ReadFile(dir + "/a/item.json")
	require.NoError(t, err)
	assert.Equal(t, "{}\n", string(text))
}

// TestRollBack makes the last of the renames fail and expects the first ones
// to be taken back.
func TestRollBack(t *testing.T) {
	dir := t.TempDir()
	put(t, dir+"/a/sea.tif", "old raster")
	put(t, dir+"/a/sea.tif.aux.xml", "old names")
	s, err := NewSet(dir, true, nil)
	require.NoError(t, err)
	require.NoError(t, fillSet(t, s))
	require.NoError(t, s.Finish(context.Background()))
	require.NoError(t, s.files[0].Close())
	require.NoError(t, os.Remove(s.files[0].path)) // as if someone cleaned up
	assertOutput(t, s.Commit(), filepath.Join(dir, "a/item.json"), "no such file")
	assert.Equal(t, []string{"a", "a/sea.tif", "a/sea.tif.aux.xml"}, listing(t, dir))
	for name, want := range map[string]string{"sea.tif": "old raster", "sea.tif.aux.xml": "old names"} {
		text, err := os.ReadFile(filepath.Join(dir, "a", name))
		require.NoError(t, err)
		assert.Equal(t, want, string(text))
	}
}

// TestTakenMeanwhile lets a file appear between the claim and the commit.
func TestTakenMeanwhile(t *testing.T) {
	s, dir := newSet(t)
	require.NoError(t, fillSet(t, s))
	put(t, dir+"/b/height.tif", "theirs")
	assertOutput(t, s.Commit(), filepath.Join(dir, "b/height.tif"), "already exists")
	assert.Equal(t, []string{"b", "b/height.tif"}, listing(t, dir))
}

// childKey marks the process that alone starts.
const childKey = "FOLDSHADE_TEST_CHILD"

// alone runs a test in a process of its own, and tells whether this is that
// process. A limit on file sizes would else hit the test runner's own files.
func alone(t *testing.T) bool {
	t.Helper()
	if os.Getenv(childKey) != "" {
		return true
	}
	exe, err := os.Executable()
	require.NoError(t, err)
	child := exec.Command(exe, "-test.run=^"+t.Name()+"$", "-test.v")
	child.Env = append(os.Environ(), childKey+"=1")
	out, err := child.CombinedOutput()
	require.NoError(t, err, "%s", out)
	require.Contains(t, string(out), "--- PASS: "+t.Name())
	return false
}

// limitFileSize makes every write beyond n bytes of a file fail, the way a
// full disk does, until the test ends. It works for every user and needs no
// mount.
func limitFileSize(t *testing.T, n uint64) {
	t.Helper()
	signal.Ignore(syscall.SIGXFSZ)
	var old syscall.Rlimit
	require.NoError(t, syscall.Getrlimit(syscall.RLIMIT_FSIZE, &old))
	require.NoError(t, syscall.Setrlimit(syscall.RLIMIT_FSIZE, &syscall.Rlimit{Cur: n, Max: old.Max}))
	t.Cleanup(func() {
		assert.NoError(t, syscall.Setrlimit(syscall.RLIMIT_FSIZE, &old))
		signal.Reset(syscall.SIGXFSZ)
	})
}

func TestDiskFullAtScratch(t *testing.T) {
	if !alone(t) {
		return
	}
	s, dir := newSet(t)
	limitFileSize(t, 1000)
	err := fillSet(t, s)
	s.Abort()
	assertOutput(t, err, filepath.Join(dir, "a/sea.tif"), "larger than the file system or the process may write")
	assert.Empty(t, listing(t, dir))
}

// TestDiskFullAtRaster stops the raster at several sizes up to the last byte:
// no size may pass unnoticed.
func TestDiskFullAtRaster(t *testing.T) {
	if !alone(t) {
		return
	}
	win := dem.Window{Row: 0, Col: 0, Rows: 1300, Cols: 1100}
	g := utmGrid(t, win.Rows, win.Cols)
	values := smooth(win.Rows, win.Cols)
	write := func(t *testing.T) (*Set, *Writer, string) {
		s, dir := newSet(t)
		w, err := s.Writer("a", floatLayer(), g, win)
		require.NoError(t, err)
		writeFloats(t, w, win, values)
		return s, w, dir
	}
	s, w, _ := write(t)
	require.NoError(t, w.Finish())
	full := w.Size()
	s.Abort()
	for name, limit := range map[string]int64{"none": 0, "header": 100, "first block": full / 50,
		"half": full / 2, "last block": full - 5000, "last byte": full - 1} {
		t.Run(name, func(t *testing.T) {
			s, _, dir := write(t)
			limitFileSize(t, uint64(limit))
			err := s.Commit()
			assertOutput(t, err, filepath.Join(dir, "a/height.tif"), "larger than the file system or the process may write")
			assert.Empty(t, listing(t, dir))
		})
	}
}

func TestDiskFullAtFile(t *testing.T) {
	if !alone(t) {
		return
	}
	s, dir := newSet(t)
	f, err := s.File("x.json")
	require.NoError(t, err)
	limitFileSize(t, 10)
	_, err = f.Write(make([]byte, 100))
	assertOutput(t, err, filepath.Join(dir, "x.json"), "larger than the file system")
	s.Abort()
	assert.Empty(t, listing(t, dir))
}

// TestNoPermission takes write permission away. The superuser may write
// everywhere, so the test gives that power up for its own thread: the file
// system's user of a Linux thread can be set apart from all others.
func TestNoPermission(t *testing.T) {
	top := t.TempDir()
	require.NoError(t, os.Chmod(top, 0o555))
	t.Cleanup(func() { _ = os.Chmod(top, 0o777) })
	runtime.LockOSThread()
	defer runtime.UnlockOSThread()
	if os.Geteuid() == 0 {
		const nobody = 65534
		require.NoError(t, syscall.Setfsuid(nobody))
		defer func() { assert.NoError(t, syscall.Setfsuid(0)) }()
	}
	_, err := NewSet(top, false, nil)
	assertOutput(t, err, top, "no permission")
	_, err = NewSet(filepath.Join(top, "out"), false, nil)
	assertOutput(t, err, filepath.Join(top, "out"), "no permission")
}
