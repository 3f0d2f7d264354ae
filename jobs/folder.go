package jobs

import (
	"bufio"
	"bytes"
	"compress/gzip"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path"
	"sort"
	"strings"
	"time"
)

// The two folders inside a drop folder where sources are filed away.
const (
	loadedFolder   = "loaded"
	rejectedFolder = "rejected"
)

// Folder is a drop folder. Every access goes through os.Root, so that neither a
// symlink nor a name can lead out of it.
type Folder struct {
	root   *os.Root
	settle time.Duration // a file is read once it has not changed for this long
	now    func() time.Time
	ahead  map[string]fs.FileInfo // files dated in the future, as the last look saw them
}

// OpenFolder opens dir, making it and its loaded/ and rejected/ when missing.
func OpenFolder(dir string, settle time.Duration, now func() time.Time) (*Folder, error) {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return nil, fmt.Errorf("drop folder: %w", err)
	}
	root, err := os.OpenRoot(dir)
	if err != nil {
		return nil, fmt.Errorf("drop folder: %w", err)
	}
	for _, sub := range []string{loadedFolder, rejectedFolder} {
		if err := root.Mkdir(sub, 0o755); err != nil && !errors.Is(err, fs.ErrExist) {
			return nil, fmt.Errorf("drop folder %s: %w", dir, err)
		}
	}
	return &Folder{root: root, settle: settle, now: now, ahead: map[string]fs.FileInfo{}}, nil
}

// Path is where the folder is.
func (f *Folder) Path() string { return f.root.Name() }

// Close gives the folder up.
func (f *Folder) Close() error { return f.root.Close() }

// dropped is a file found in the drop folder.
type dropped struct {
	name string // slash-separated, relative to the folder
	info fs.FileInfo
	rank int
}

// list finds the files that have settled, documents first, then run sheets,
// then the rest by name: so that a backlog is binned once and not again. A
// folder that cannot be read is named in the error, and the rest is still listed.
func (f *Folder) list() (settled []dropped, waiting int, err error) {
	var problems []error
	fs.WalkDir(f.root.FS(), ".", func(name string, d fs.DirEntry, werr error) error {
		switch {
		case werr != nil:
			problems = append(problems, fmt.Errorf("drop folder, %s: %w", name, werr))
			return nil
		case d.IsDir() && (name == loadedFolder || name == rejectedFolder):
			return fs.SkipDir
		case d.IsDir() || strings.HasPrefix(path.Base(name), "."):
			return nil
		}
		info, err := d.Info()
		if err != nil { // gone since the folder was listed
			return nil
		}
		if info.Mode().IsRegular() && !f.settled(name, info) {
			waiting++
			return nil
		}
		settled = append(settled, dropped{name: name, info: info, rank: f.rank(name, info)})
		return nil
	})
	sort.Slice(settled, func(i, j int) bool {
		if settled[i].rank != settled[j].rank {
			return settled[i].rank < settled[j].rank
		}
		return settled[i].name < settled[j].name
	})
	return settled, waiting, errors.Join(problems...)
}

// settled reports whether a file has stopped changing. One dated in the future
// (a tester's clock is ahead) has settled when two looks find it the same.
func (f *Folder) settled(name string, info fs.FileInfo) bool {
	age := f.now().Sub(info.ModTime())
	if age >= 0 {
		delete(f.ahead, name)
		return age >= f.settle
	}
	last, seen := f.ahead[name]
	f.ahead[name] = info
	return seen && last.Size() == info.Size() && last.ModTime().Equal(info.ModTime())
}

const (
	rankCatalogue = iota
	rankDocument
	rankRunSheet
	rankReadings
)

// rank looks at the first lines only; a file that cannot be opened ranks last
// and gives its error when it is read.
func (f *Folder) rank(name string, info fs.FileInfo) int {
	if !info.Mode().IsRegular() {
		return rankReadings
	}
	file, err := f.root.Open(name)
	if err != nil {
		return rankReadings
	}
	defer file.Close()
	return rankOf(file)
}

// rankOf tells by the first lines what a source holds.
func rankOf(r io.Reader) int {
	head := bufio.NewReaderSize(r, 512)
	if magic, _ := head.Peek(2); bytes.Equal(magic, []byte{0x1f, 0x8b}) {
		if z, err := gzip.NewReader(head); err == nil {
			head = bufio.NewReaderSize(z, 512)
		}
	}
	text, _ := head.Peek(512)
	for line := range strings.Lines(strings.TrimPrefix(string(text), "\ufeff")) {
		line = strings.TrimSpace(line)
		switch {
		case strings.HasPrefix(line, "# epitally: run sheet"):
			return rankRunSheet
		case strings.HasPrefix(line, "catalogue:"):
			return rankCatalogue
		case strings.HasPrefix(line, "specification:"), strings.HasPrefix(line, "profile:"):
			return rankDocument
		case line == "", line == "---", strings.HasPrefix(line, "#"): // a document may begin with remarks
			continue
		}
		break
	}
	return rankReadings
}

// errChanged says that a file was written to, replaced or removed while it was
// read. It is left where it is and looked at again.
var errChanged = errors.New("changed while it was read; left to settle and to be read again")

// errGone says that a file was there when the folder was listed and is no more:
// a person took it away, or another server filed it.
var errGone = errors.New("gone since the folder was listed")

// unchanged compares a file with what it was when it was opened.
func (f *Folder) unchanged(name string, before fs.FileInfo) error {
	after, err := f.root.Stat(name)
	if err != nil || after.Size() != before.Size() || !after.ModTime().Equal(before.ModTime()) || !os.SameFile(before, after) {
		return fmt.Errorf("%s: %w", name, errChanged)
	}
	return nil
}

// fileAway moves a file into loaded/ or rejected/, keeping its sub-folder. A
// name that is taken gets a number, so that nothing is overwritten.
func (f *Folder) fileAway(name, to string) (string, error) {
	target, err := f.free(path.Join(to, name))
	if err != nil {
		return "", err
	}
	if err := f.root.Rename(name, target); err != nil {
		return "", fmt.Errorf("file away: %w", err)
	}
	return target, nil
}

func (f *Folder) free(target string) (string, error) {
	if err := f.root.MkdirAll(path.Dir(target), 0o755); err != nil {
		return "", fmt.Errorf("file away: %w", err)
	}
	for n := 1; ; n++ {
		candidate := target
		if n > 1 {
			candidate = fmt.Sprintf("%s.%d", target, n)
		}
		if _, err := f.root.Lstat(candidate); errors.Is(err, fs.ErrNotExist) {
			return candidate, nil
		} else if err != nil {
			return "", fmt.Errorf("file away: %w", err)
		}
	}
}

// reject moves a file into rejected/ and writes the reason beside it.
func (f *Folder) reject(name, reason string) error {
	target, err := f.fileAway(name, rejectedFolder)
	if err != nil {
		return err
	}
	if err := f.root.WriteFile(target+".reason.txt", []byte(reason+"\n"), 0o644); err != nil {
		return fmt.Errorf("write reason: %w", err)
	}
	return nil
}

// DocumentsFirst orders paths as a scan does: catalogues, other documents, run
// sheets, then readings; otherwise the order stays. A path that cannot be
// opened ranks last.
func DocumentsFirst(paths []string) {
	ranks := make(map[string]int, len(paths))
	for _, p := range paths {
		ranks[p] = rankReadings
		if file, err := os.Open(p); err == nil {
			ranks[p] = rankOf(file)
			file.Close()
		}
	}
	sort.SliceStable(paths, func(i, j int) bool { return ranks[paths[i]] < ranks[paths[j]] })
}
