package localpg

import (
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"sort"
	"strconv"
	"strings"

	"epitally/analytics"
)

// minMajor is the oldest PostgreSQL whose planes can be LZ4-compressed by every
// distribution's build, and the oldest that Epitally is tested with.
const minMajor = 15

// Programs are the server programs of one PostgreSQL installation.
type Programs struct {
	Dir   string // folder that holds them all
	Major int    // 15, 16, …
}

func (p Programs) path(name string) string { return filepath.Join(p.Dir, name) }

// folders are where distributions put server programs that are not in PATH.
var folders = []string{
	"/usr/lib/postgresql/*/bin",                   // Debian, Ubuntu
	"/usr/pgsql-*/bin",                            // Red Hat family, versioned packages
	"/usr/lib/postgresql*/bin",                    // SUSE
	"/usr/libexec/postgresql*",                    // Alpine
	"/usr/local/pgsql/bin",                        // built from source
	"/opt/homebrew/opt/postgresql@*/bin",          // macOS, Apple silicon
	"/usr/local/opt/postgresql@*/bin",             // macOS, Intel
	"/Applications/*.app/Contents/Versions/*/bin", // macOS application bundles
}

// Find looks for server programs of PostgreSQL 15 or newer: first in PATH, then
// in the distributions' versioned folders, newest first. The error,
// analytics.ErrNotFound, says what to install.
func Find() (Programs, error) {
	return findIn(candidates(), func(major int) bool { return major >= minMajor })
}

// findMajor looks for the programs of one version, for a folder made by it.
func findMajor(major int) (Programs, error) {
	p, err := findIn(candidates(), func(m int) bool { return m == major })
	if err != nil {
		return p, fmt.Errorf("it was made by PostgreSQL %d, whose server programs are not installed: install that version again "+
			"(Debian, Ubuntu: apt-get install postgresql-%d), or choose another folder with --data: %w", major, major, analytics.ErrConflict)
	}
	return p, nil
}

func candidates() []string {
	var dirs []string
	for _, name := range []string{"postgres", "initdb"} {
		if path, err := exec.LookPath(name); err == nil {
			dirs = append(dirs, filepath.Dir(path))
			if real, err := filepath.EvalSymlinks(path); err == nil {
				dirs = append(dirs, filepath.Dir(real))
			}
		}
	}
	for _, pattern := range folders {
		found, _ := filepath.Glob(pattern) // the patterns are well formed
		sort.Slice(found, func(i, j int) bool { return versionIn(found[i]) > versionIn(found[j]) })
		dirs = append(dirs, found...)
	}
	return dirs
}

// findIn takes the first folder whose programs have a wanted version.
func findIn(dirs []string, wanted func(major int) bool) (Programs, error) {
	var tooOld []string
	for _, dir := range dirs {
		p, err := programsIn(dir)
		switch {
		case err != nil:
			continue
		case wanted(p.Major):
			return p, nil
		}
		tooOld = append(tooOld, fmt.Sprintf("%s is PostgreSQL %d", dir, p.Major))
	}
	problem := "no PostgreSQL server programs (postgres, initdb) were found"
	if len(tooOld) > 0 {
		problem = "only server programs that are too old were found (" + strings.Join(tooOld, "; ") + ")"
	}
	return Programs{}, fmt.Errorf("%s; PostgreSQL %d or newer is needed: install it (Debian, Ubuntu: apt-get install postgresql; "+
		"Fedora, Red Hat: dnf install postgresql-server; Alpine: apk add postgresql; macOS: brew install postgresql@17), "+
		"or name an existing database with --database-url: %w", problem, minMajor, analytics.ErrNotFound)
}

var errIncomplete = errors.New("postgres and initdb are not both there")

// programsIn asks the programs in dir for their version. Both must be there.
func programsIn(dir string) (Programs, error) {
	p := Programs{Dir: dir}
	for _, name := range []string{"postgres", "initdb"} {
		if info, err := os.Stat(p.path(name)); err != nil || info.IsDir() || info.Mode()&0o111 == 0 {
			return p, errIncomplete
		}
	}
	out, err := exec.Command(p.path("postgres"), "--version").Output()
	if err != nil {
		return p, fmt.Errorf("%s --version: %w", p.path("postgres"), err)
	}
	p.Major, err = parseMajor(string(out))
	return p, err
}

var majorRule = regexp.MustCompile(`\(PostgreSQL\) (\d+)`)

// parseMajor reads "postgres (PostgreSQL) 15.9 (Debian 15.9-1)" and its like.
func parseMajor(version string) (int, error) {
	m := majorRule.FindStringSubmatch(version)
	if m == nil {
		return 0, fmt.Errorf("no version in %q", strings.TrimSpace(version))
	}
	return strconv.Atoi(m[1])
}

var digits = regexp.MustCompile(`\d+`)

// versionIn is the version a folder's name states, so that 16 comes before 9.
func versionIn(path string) int {
	n, _ := strconv.Atoi(digits.FindString(strings.TrimPrefix(path, "/opt/homebrew")))
	return n
}
