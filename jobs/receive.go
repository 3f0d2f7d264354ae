package jobs

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"strconv"
	"strings"
	"unicode"

	"epitally/analytics"
)

// maxReceivedName is the longest name of an uploaded file in bytes.
const maxReceivedName = 200

// Receive takes an uploaded file into the folder, where the next scan finds it as
// if it had been dropped: written under a hidden name first, so that no scan meets
// half of it, and never over another file. It gives the name that the file has
// there. A name that is none is analytics.ErrInvalid, more than limit bytes
// analytics.ErrTooLarge; what was written until then is removed.
func (f *Folder) Receive(ctx context.Context, name string, r io.Reader, limit int64) (stored string, err error) {
	if err := checkReceived(name); err != nil {
		return "", err
	}
	hidden := ".incoming-" + rand.Text()
	file, err := f.root.Create(hidden)
	if err != nil {
		return "", fmt.Errorf("receive %s: %w", name, err)
	}
	defer func() {
		if err != nil {
			f.root.Remove(hidden)
		}
	}()
	n, err := io.Copy(file, io.LimitReader(reading{ctx, r}, limit+1))
	if err == nil {
		err = file.Sync()
	}
	if closed := file.Close(); err == nil {
		err = closed
	}
	switch {
	case err != nil:
		return "", fmt.Errorf("receive %s: %w", name, err)
	case n > limit:
		return "", fmt.Errorf("%s is over %d bytes: split it, or raise --max-file-mb: %w", name, limit, analytics.ErrTooLarge)
	case n == 0:
		return "", fmt.Errorf("%s is empty: %w", name, analytics.ErrInvalid)
	}
	return f.place(hidden, name)
}

// reading stops when its context ends.
type reading struct {
	ctx context.Context
	r   io.Reader
}

func (r reading) Read(p []byte) (int, error) {
	if err := r.ctx.Err(); err != nil {
		return 0, err
	}
	return r.r.Read(p)
}

// place gives the file its name, or the first "name (2)" that no file has. A link
// fails where a name is taken, which a rename would overwrite.
func (f *Folder) place(hidden, name string) (string, error) {
	for try := 1; try <= 1000; try++ {
		as := name
		if try > 1 {
			stem, ending, _ := strings.Cut(name, ".")
			if as = stem + " (" + strconv.Itoa(try) + ")"; ending != "" {
				as += "." + ending
			}
		}
		err := f.root.Link(hidden, as)
		if errors.Is(err, fs.ErrExist) {
			continue
		}
		if err != nil {
			return "", fmt.Errorf("receive %s: %w", name, err)
		}
		return as, f.root.Remove(hidden)
	}
	return "", fmt.Errorf("a thousand files called %s wait in the drop folder: %w", name, analytics.ErrConflict)
}

func checkReceived(name string) error {
	bad := func(r rune) bool { return !unicode.IsPrint(r) || r == '/' || r == '\\' || r == unicode.ReplacementChar }
	switch {
	case name == "" || len(name) > maxReceivedName:
		return fmt.Errorf("a file's name has 1 to %d bytes, this one %d: %w", maxReceivedName, len(name), analytics.ErrInvalid)
	case strings.HasPrefix(name, ".") || strings.ContainsFunc(name, bad):
		return fmt.Errorf("the name %q begins with a dot or holds / , \\ or characters that do not print: %w", name, analytics.ErrInvalid)
	case name == loadedFolder || name == rejectedFolder:
		return fmt.Errorf("%q is a folder's name here: %w", name, analytics.ErrInvalid)
	}
	return nil
}
