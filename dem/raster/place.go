package raster

import (
	"cmp"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/xml"
	"errors"
	"fmt"
	"hash"
	"io"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"sync"
	"sync/atomic"
	"syscall"
	"time"

	"golang.org/x/sync/errgroup"

	"foldshade/dem"
)

// An OutputError says that something could not be written, in one line that
// names the place, what is wrong and the next step.
type OutputError struct {
	Path  string // the output folder or file
	Text  string
	Cause error // may be nil
}

// Error returns the line.
func (e *OutputError) Error() string { return fmt.Sprintf("output %q: %s", e.Path, e.Text) }

// Unwrap returns the cause.
func (e *OutputError) Unwrap() error { return e.Cause }

// failed wraps an error of the file system or of GDAL; what the action was is
// said in a few words, as in "create the folder". An OutputError stays as it
// is.
func failed(path, action string, err error) error {
	var out *OutputError
	if errors.As(err, &out) {
		return err
	}
	return &OutputError{path, fmt.Sprintf("cannot %s: %s", action, reason(err)), err}
}

// reason turns the errors a user can do something about into words. GDAL has
// only the system's text for an error, not its number.
func reason(err error) string {
	text := strings.Join(strings.Fields(firstLine(err)), " ")
	for _, known := range []struct {
		errno syscall.Errno
		text  string
	}{
		{syscall.ENOSPC, "the disk is full; free some space or choose another output folder"},
		{syscall.EDQUOT, "the disk quota is used up; free some space or choose another output folder"},
		{syscall.EFBIG, "the file is larger than the file system or the process may write; choose another output folder or a smaller area"},
		{syscall.EROFS, "the file system is read-only; choose another output folder"},
		{syscall.EACCES, "no permission to write there; choose another output folder"},
		{syscall.EPERM, "no permission to write there; choose another output folder"},
		{syscall.ENOTDIR, "a part of the path is a file, not a folder"},
		{syscall.EXDEV, "it is on another file system than the output folder; choose another output folder"},
		{syscall.ENAMETOOLONG, "the name is too long for the file system; shorten it"},
	} {
		if errors.Is(err, known.errno) || strings.Contains(strings.ToLower(text), known.errno.Error()) {
			return known.text
		}
	}
	var path *fs.PathError
	if errors.As(err, &path) {
		return path.Err.Error()
	}
	return text
}

// Set is a set of output files that become visible together or not at all.
// Everything is written under a hidden folder inside the output folder;
// Commit renames the files to their final names, Abort removes all of them.
// Its methods may be called from several goroutines.
type Set struct {
	// Threads is the number of processors that Finish may keep busy; 0 means
	// all of them.
	Threads int
	// Progress, when not nil, is told by Finish of bytes of cells made into
	// rasters out of all; it may be called from several goroutines.
	Progress func(done, all int64)

	dir       string
	temp      string
	madeDir   bool // the output folder did not exist before
	overwrite bool
	inputs    []input

	mu      sync.Mutex
	names   map[string]bool // final names taken, relative to dir
	writers []*Writer
	files   []*File
	closed  bool
}

// input is a file that no output may replace.
type input struct {
	name string
	info fs.FileInfo
}

// tempPattern names the hidden folder that holds unfinished files.
const tempPattern = ".foldshade-*"

// NewSet prepares the output folder. The folder is made when only its last
// part is missing. Files that exist are refused unless overwrite is true.
// Inputs are the files and GDAL names that the run reads; neither they nor
// the files that a VRT among them lists are ever replaced. Errors are of type
// *OutputError.
func NewSet(dir string, overwrite bool, inputs []string) (*Set, error) {
	s := &Set{dir: filepath.Clean(dir), overwrite: overwrite, names: map[string]bool{}}
	if err := s.makeDir(); err != nil {
		return nil, err
	}
	for _, name := range inputs {
		s.addInput(name, 0)
	}
	temp, err := os.MkdirTemp(s.dir, tempPattern)
	if err != nil {
		s.removeDir()
		return nil, failed(s.dir, "write in the folder", err)
	}
	s.temp = temp
	return s, nil
}

func (s *Set) makeDir() error {
	info, err := os.Stat(s.dir)
	switch {
	case err == nil && info.IsDir():
		return nil
	case err == nil:
		return &OutputError{Path: s.dir, Text: "is a file; give the name of a folder"}
	case !errors.Is(err, fs.ErrNotExist):
		return failed(s.dir, "use the folder", err)
	}
	parent := filepath.Dir(s.dir)
	if _, err := os.Stat(parent); errors.Is(err, fs.ErrNotExist) {
		return &OutputError{s.dir, fmt.Sprintf("the folder %q above it does not exist; create it first", parent), err}
	}
	if err := os.Mkdir(s.dir, 0o777); err != nil {
		return failed(s.dir, "create the folder", err)
	}
	s.madeDir = true
	return nil
}

// removeDir takes the output folder away again when this set made it and
// nothing else has come to live there.
func (s *Set) removeDir() {
	if s.madeDir {
		_ = os.Remove(s.dir) // refused by the system when it is not empty, as wanted
	}
}

// maxNesting bounds how deep VRT files that list VRT files are followed.
const maxNesting = 8

// addInput notes the file behind a GDAL name, and the files of a VRT.
func (s *Set) addInput(name string, depth int) {
	path, info := fileBehind(name)
	if info == nil {
		return
	}
	s.inputs = append(s.inputs, input{path, info})
	if depth == maxNesting {
		return
	}
	for _, source := range vrtSources(path) {
		s.addInput(source, depth+1)
	}
}

// fileBehind returns the file of the disk that a GDAL name leads to: the name
// itself, or the archive in a name such as /vsizip/a.zip/b.tif. The info is
// nil when there is none.
func fileBehind(name string) (string, fs.FileInfo) {
	for strings.HasPrefix(name, "/vsi") {
		_, rest, ok := strings.Cut(name[1:], "/")
		if !ok {
			return name, nil
		}
		name = strings.NewReplacer("{", "", "}", "").Replace(rest)
	}
	for path := filepath.Clean(name); ; path = filepath.Dir(path) {
		info, err := os.Stat(path)
		if err == nil && info.Mode().IsRegular() {
			return path, info
		}
		if err == nil || filepath.Dir(path) == path {
			return path, nil
		}
	}
}

// vrtSources returns the source files that a VRT file lists, nil when the
// file is no VRT.
func vrtSources(path string) []string {
	f, err := os.Open(path)
	if err != nil {
		return nil
	}
	defer f.Close()
	head := make([]byte, 512)
	n, _ := io.ReadFull(f, head)
	if !strings.Contains(string(head[:n]), "<VRTDataset") {
		return nil
	}
	if _, err := f.Seek(0, io.SeekStart); err != nil {
		return nil
	}
	return sourceNames(xml.NewDecoder(f), filepath.Dir(path))
}

func sourceNames(d *xml.Decoder, dir string) []string {
	var names []string
	for {
		token, err := d.Token()
		if err != nil {
			return names
		}
		start, ok := token.(xml.StartElement)
		if !ok || (start.Name.Local != "SourceFilename" && start.Name.Local != "SourceDataset") {
			continue
		}
		var name string
		if d.DecodeElement(&name, &start) != nil {
			return names
		}
		for _, a := range start.Attr {
			if strings.EqualFold(a.Name.Local, "relativeToVRT") && a.Value == "1" {
				name = filepath.Join(dir, name)
			}
		}
		names = append(names, name)
	}
}

// sidecars are the files that GDAL reads beside a raster: a stale one would
// give a new raster the statistics or overviews of an old one.
var sidecars = []string{".aux.xml", ".ovr", ".msk"}

// claim reserves a final name, given relative to the output folder with
// forward slashes, and returns a path for the unfinished file.
func (s *Set) claim(rel string) (string, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	final := filepath.Join(s.dir, filepath.FromSlash(rel))
	if s.closed {
		return "", &OutputError{Path: final, Text: "the set of outputs is already closed"}
	}
	if !filepath.IsLocal(filepath.FromSlash(rel)) || strings.HasPrefix(rel, ".") || strings.Contains(rel, "/.") {
		return "", &OutputError{Path: final, Text: "the name must stay inside the output folder, and no part of it may begin with a dot"}
	}
	if s.names[rel] {
		return "", &OutputError{Path: final, Text: "would be written twice in one run; give the looks different names"}
	}
	if err := s.vacant(final); err != nil {
		return "", err
	}
	if strings.HasSuffix(rel, ".tif") {
		for _, ext := range sidecars {
			if err := s.vacant(final + ext); err != nil {
				return "", err
			}
		}
	}
	s.names[rel] = true
	return filepath.Join(s.temp, fmt.Sprintf("%04d%s", len(s.names), filepath.Ext(rel))), nil
}

// vacant tells whether a final name may be written.
func (s *Set) vacant(final string) error {
	info, err := os.Stat(final)
	if errors.Is(err, fs.ErrNotExist) {
		if _, err := os.Lstat(final); err == nil && !s.overwrite {
			return exists(final)
		}
		return nil
	}
	if err != nil {
		return failed(final, "write the file", err)
	}
	if info.IsDir() {
		return &OutputError{Path: final, Text: "is a folder; remove it or choose another output folder"}
	}
	for _, in := range s.inputs {
		if os.SameFile(in.info, info) {
			return &OutputError{Path: final, Text: fmt.Sprintf("is the input %q itself; choose another output folder", in.name)}
		}
	}
	if !s.overwrite {
		return exists(final)
	}
	return nil
}

func exists(final string) error {
	return &OutputError{final, "already exists; choose another output folder, or --overwrite to replace it", fs.ErrExist}
}

// Writer starts a layer of a look, to become the file look/NAME.tif; look may
// be several folders deep, or empty for a file in the output folder itself. The
// window is the rectangle of the grid that the file covers. It panics when
// the window is not inside the grid.
func (s *Set) Writer(look string, layer Layer, grid *dem.Grid, window dem.Window) (*Writer, error) {
	rel := path.Join(look, layer.Name+".tif")
	temp, err := s.claim(rel)
	if err != nil {
		return nil, err
	}
	w, err := newWriter(temp, filepath.Join(s.dir, filepath.FromSlash(rel)), layer, grid, window)
	if err != nil {
		return nil, err
	}
	w.rel, w.set = rel, s
	s.mu.Lock()
	s.writers = append(s.writers, w)
	s.mu.Unlock()
	return w, nil
}

// File is an output that is not a raster, or not one of a Writer's. Close it
// before Commit, or let Commit do it.
type File struct {
	rel, path, final string
	f                *os.File
	sum              hash.Hash
	size             int64
	closed           bool
}

// File starts a file under a name relative to the output folder, with forward
// slashes.
func (s *Set) File(rel string) (*File, error) {
	temp, err := s.claim(rel)
	if err != nil {
		return nil, err
	}
	final := filepath.Join(s.dir, filepath.FromSlash(rel))
	f, err := os.OpenFile(temp, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
	if err != nil {
		return nil, failed(final, "create the file", err)
	}
	out := &File{rel: rel, path: temp, final: final, f: f, sum: sha256.New()}
	s.mu.Lock()
	s.files = append(s.files, out)
	s.mu.Unlock()
	return out, nil
}

// Write appends to the file.
func (f *File) Write(p []byte) (int, error) {
	n, err := f.f.Write(p)
	f.sum.Write(p[:n])
	f.size += int64(n)
	if err != nil {
		return n, failed(f.final, "write", err)
	}
	return n, nil
}

// Close brings the file to the disk. A second call does nothing.
func (f *File) Close() error {
	if f.closed {
		return nil
	}
	f.closed = true
	if err := errors.Join(f.f.Sync(), f.f.Close()); err != nil {
		return failed(f.final, "write", err)
	}
	return nil
}

// Size returns the bytes written so far.
func (f *File) Size() int64 { return f.size }

// Checksum returns the multihash of what was written so far.
func (f *File) Checksum() string { return multihash(f.sum) }

// multihash writes a SHA-256 sum the way the STAC file extension wants it:
// the hash's code and length (12, 20 hexadecimal), then the sum, lower case.
func multihash(sum hash.Hash) string { return "1220" + hex.EncodeToString(sum.Sum(nil)) }

// Finish makes the rasters of every Writer that is not finished yet, several
// at a time. When the context ends it returns at once with the context's
// error; only Abort may follow then, as after any other error.
func (s *Set) Finish(ctx context.Context) error {
	s.mu.Lock()
	writers := slices.Clone(s.writers)
	s.mu.Unlock()
	var open []*Writer
	var all int64
	for _, w := range writers {
		if !w.finished() {
			open = append(open, w)
			all += w.cost()
		}
	}
	// Long ones first, so that no thread is left with one at the end.
	slices.SortStableFunc(open, func(a, b *Writer) int { return cmp.Compare(b.cost(), a.cost()) })
	var made atomic.Int64
	threads := s.threads()
	each := max(1, threads/max(1, len(open)))
	group, inner := errgroup.WithContext(ctx)
	group.SetLimit(threads)
	done := make(chan error, 1)
	go func() {
		for _, w := range open {
			group.Go(func() error {
				if err := inner.Err(); err != nil {
					return err
				}
				err := w.finish(each)
				if n := made.Add(w.cost()); err == nil && s.Progress != nil {
					s.Progress(n, all)
				}
				return err
			})
		}
		done <- group.Wait()
	}()
	select {
	case err := <-done:
		return err
	case <-ctx.Done():
		return context.Cause(ctx)
	}
}

func (s *Set) threads() int {
	if s.Threads > 0 {
		return s.Threads
	}
	return runtime.GOMAXPROCS(0)
}

// Commit finishes what is not finished and gives every file its final name;
// the set is closed then. On an error nothing stays under a final name that
// was not there before, and the set is aborted.
func (s *Set) Commit() error {
	err := s.Finish(context.Background())
	for _, f := range s.files {
		err = errors.Join(err, f.Close())
	}
	if err == nil {
		err = s.publish()
	}
	if err != nil {
		s.Abort()
		return err
	}
	s.mu.Lock()
	s.closed = true
	s.mu.Unlock()
	s.removeTemp()
	return nil
}

// pair is a finished file and its final name.
type pair struct{ from, to string }

func (s *Set) pairs() []pair {
	var all []pair
	for _, w := range s.writers {
		final := filepath.Join(s.dir, filepath.FromSlash(w.rel))
		all = append(all, pair{w.path, final})
		// GDAL keeps category names beside a GeoTIFF, never in it.
		if _, err := os.Lstat(w.path + ".aux.xml"); err == nil {
			all = append(all, pair{w.path + ".aux.xml", final + ".aux.xml"})
		}
	}
	for _, f := range s.files {
		all = append(all, pair{f.path, filepath.Join(s.dir, filepath.FromSlash(f.rel))})
	}
	return all
}

// publish renames the files, and takes every rename back when one fails.
func (s *Set) publish() error {
	p := publisher{set: s}
	err := p.run(s.pairs())
	if err != nil {
		for _, undo := range slices.Backward(p.undo) {
			undo()
		}
	}
	return err
}

type publisher struct {
	set     *Set
	undo    []func()
	folders []string
	backups int
}

func (p *publisher) run(all []pair) error {
	for _, move := range all {
		if err := p.folder(filepath.Dir(move.to)); err != nil {
			return err
		}
		// The name may have been taken since it was claimed.
		if err := p.set.vacant(move.to); err != nil {
			return err
		}
	}
	for _, move := range all {
		if strings.HasSuffix(move.to, ".tif") {
			for _, ext := range sidecars {
				if err := p.setAside(move.to + ext); err != nil {
					return err
				}
			}
		}
		if err := p.setAside(move.to); err != nil {
			return err
		}
		if err := p.rename(move.from, move.to); err != nil {
			return failed(move.to, "give the file its final name", err)
		}
	}
	if p.set.madeDir {
		p.folders = append(p.folders, filepath.Dir(p.set.dir))
	}
	for _, folder := range p.folders {
		if err := syncFolder(folder); err != nil {
			return failed(folder, "bring the folder to the disk", err)
		}
	}
	return nil
}

// folder makes a folder below the output folder, and those above it.
func (p *publisher) folder(dir string) error {
	if slices.Contains(p.folders, dir) {
		return nil
	}
	if dir != p.set.dir {
		if err := p.folder(filepath.Dir(dir)); err != nil {
			return err
		}
		err := os.Mkdir(dir, 0o777)
		if err == nil {
			p.undo = append(p.undo, func() { _ = os.Remove(dir) })
		} else if info, bad := os.Stat(dir); bad != nil {
			return failed(dir, "create the folder", err)
		} else if !info.IsDir() {
			return &OutputError{dir, "is a file, and a folder of that name is needed; remove it or choose another output folder", err}
		}
	}
	p.folders = append(p.folders, dir)
	return nil
}

// setAside moves an existing file into the hidden folder, to be brought back
// when the run fails and removed with the folder when it does not.
func (p *publisher) setAside(final string) error {
	if _, err := os.Lstat(final); errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	p.backups++
	if err := p.rename(final, filepath.Join(p.set.temp, fmt.Sprintf("old%d", p.backups))); err != nil {
		return failed(final, "replace the file", err)
	}
	return nil
}

func (p *publisher) rename(from, to string) error {
	if err := os.Rename(from, to); err != nil {
		return err
	}
	p.undo = append(p.undo, func() { _ = os.Rename(to, from) })
	return nil
}

// syncFolder makes renames in a folder outlast a power cut. File systems that
// cannot do this say so with EINVAL; the files themselves are safe there.
func syncFolder(dir string) error {
	f, err := os.Open(dir)
	if err != nil {
		return err
	}
	err = f.Sync()
	if errors.Is(err, syscall.EINVAL) || errors.Is(err, syscall.ENOTSUP) {
		err = nil
	}
	return errors.Join(err, f.Close())
}

// Abort removes everything that was written. After Commit it does nothing.
func (s *Set) Abort() {
	s.mu.Lock()
	if s.closed {
		s.mu.Unlock()
		return
	}
	s.closed = true
	writers, files := s.writers, s.files
	s.mu.Unlock()
	for _, w := range writers {
		w.Abort()
	}
	for _, f := range files {
		if !f.closed {
			f.closed = true
			_ = f.f.Close()
		}
	}
	s.removeTemp()
	s.removeDir()
}

// removeTemp removes the hidden folder. GDAL may still be writing a raster
// that Finish gave up waiting for: it fails once its folder is gone, but may
// put a file in between, so the removal is tried again for two seconds.
func (s *Set) removeTemp() {
	for range 100 {
		if os.RemoveAll(s.temp) == nil {
			return
		}
		time.Sleep(20 * time.Millisecond)
	}
}
