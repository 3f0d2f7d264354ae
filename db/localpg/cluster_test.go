package localpg

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"go.uber.org/goleak"

	"epitally/analytics"
)

// helperFolder, when set, makes the test binary an Epitally that keeps a cluster
// until it is killed.
const helperFolder = "LOCALPG_TEST_FOLDER"

func TestMain(m *testing.M) {
	if dir := os.Getenv(helperFolder); dir != "" {
		c, err := Start(context.Background(), Options{DataDir: dir})
		if err != nil {
			fmt.Println("error:", err)
			os.Exit(1)
		}
		fmt.Println(c.URL("epitally"))
		select {} // until killed
	}
	goleak.VerifyTestMain(m)
}

func start(t *testing.T, dir string) *Cluster {
	t.Helper()
	return startWith(t, Options{DataDir: dir, Throwaway: true})
}

func startWith(t *testing.T, o Options) *Cluster {
	t.Helper()
	c, err := Start(t.Context(), o)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.Stop(context.Background()) })
	return c
}

func execute(t *testing.T, url, sql string) {
	t.Helper()
	if err := tryExecute(t, url, sql); err != nil {
		t.Fatalf("%s: %v", sql, err)
	}
}

func tryExecute(t *testing.T, url, sql string) error {
	t.Helper()
	ctx := context.WithoutCancel(t.Context())
	conn, err := pgx.Connect(ctx, url)
	if err != nil {
		return err
	}
	defer conn.Close(ctx)
	_, err = conn.Exec(ctx, sql)
	return err
}

// eventually tries until the condition holds, for up to 20 seconds.
func eventually(t *testing.T, what string, try func() error) {
	t.Helper()
	tick := time.NewTicker(20 * time.Millisecond)
	defer tick.Stop()
	limit := time.After(20 * time.Second)
	for {
		err := try()
		if err == nil {
			return
		}
		select {
		case <-tick.C:
		case <-limit:
			t.Fatalf("%s: %v", what, err)
		}
	}
}

func postmaster(t *testing.T, dir string) int {
	t.Helper()
	f, err := readPidFile(filepath.Join(dir, "server", "postmaster.pid"))
	if err != nil || f == nil {
		t.Fatalf("no postmaster.pid: %v", err)
	}
	return f.pid
}

func TestStartMakesReusesAndStops(t *testing.T) {
	t.Parallel()
	dir := filepath.Join(t.TempDir(), "data", "postgres")
	// A killed initdb's leftovers.
	if err := os.MkdirAll(filepath.Join(dir, makingPrefix+"1", "base"), 0o700); err != nil {
		t.Fatal(err)
	}
	// Durable, as a real one.
	c, err := Start(t.Context(), Options{DataDir: dir})
	if err != nil {
		t.Fatal(err)
	}
	execute(t, c.URL("epitally"), "CREATE TABLE kept (a int)")
	if left, _ := filepath.Glob(filepath.Join(dir, makingPrefix+"*")); len(left) != 0 {
		t.Errorf("left over: %v", left)
	}
	for range 2 { // the second call is harmless
		if err := c.Stop(t.Context()); err != nil {
			t.Fatal(err)
		}
	}
	begun := time.Now()
	c, err = Start(t.Context(), Options{DataDir: dir})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.Stop(context.Background()) })
	took := time.Since(begun)
	t.Logf("ready on an existing folder in %s", took)
	if took > 3*time.Second { // the limit for the whole program
		t.Errorf("ready in %s", took)
	}
	execute(t, c.URL("epitally"), "INSERT INTO kept VALUES (1)")
	for setting, want := range map[string]string{"listen_addresses": "", "fsync": "on", "synchronous_commit": "on", "data_checksums": "on", "server_encoding": "UTF8",
		"autovacuum": "on", "jit": "off", "wal_compression": "lz4", "default_toast_compression": "lz4"} {
		conn, err := pgx.Connect(t.Context(), c.URL("epitally"))
		if err != nil {
			t.Fatal(err)
		}
		var got string
		if err := conn.QueryRow(t.Context(), "SELECT current_setting($1)", setting).Scan(&got); err != nil || got != want {
			t.Errorf("%s = %q, want %q (%v)", setting, got, want, err)
		}
		conn.Close(t.Context())
	}
	if info, err := os.Stat(filepath.Join(dir, "socket")); err != nil || info.Mode().Perm() != 0o700 {
		t.Errorf("socket folder: %v %v", info, err)
	}
}

func TestASecondOneOnTheFolderIsRefused(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	start(t, dir)
	_, err := Start(t.Context(), Options{DataDir: dir, Throwaway: true})
	if !errors.Is(err, ErrInUse) || !errors.Is(err, analytics.ErrConflict) || !strings.Contains(err.Error(), dir) || !strings.Contains(err.Error(), strconv.Itoa(os.Getpid())) {
		t.Fatalf("got %v", err)
	}
}

func TestAKilledServerIsStartedAgain(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	c := startWith(t, Options{DataDir: dir}) // durable: what was committed must be there
	execute(t, c.URL("epitally"), "CREATE TABLE kept AS SELECT 1 AS a")
	for range 2 {
		old := postmaster(t, dir)
		if err := syscall.Kill(old, syscall.SIGKILL); err != nil {
			t.Fatal(err)
		}
		eventually(t, "the server came back", func() error {
			if err := tryExecute(t, c.URL("epitally"), "SELECT a FROM kept"); err != nil {
				return err
			}
			if postmaster(t, dir) == old {
				return errors.New("the old one still answers")
			}
			return nil
		})
	}
}

// startHelper runs an Epitally of its own on dir.
func startHelper(t *testing.T, dir string) (cmd *exec.Cmd, url string) {
	t.Helper()
	cmd = exec.Command(os.Args[0])
	cmd.Env = append(os.Environ(), helperFolder+"="+dir)
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { cmd.Process.Kill(); cmd.Wait() })
	url, err = bufio.NewReader(out).ReadString('\n')
	if err != nil || strings.HasPrefix(url, "error") {
		t.Fatalf("helper: %q %v", url, err)
	}
	return cmd, strings.TrimSpace(url)
}

func TestAKilledEpitallyLosesNothing(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	cmd, url := startHelper(t, dir)
	execute(t, url, "CREATE TABLE kept AS SELECT 1 AS a")
	if err := cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	cmd.Wait() // its error is the kill
	begun := time.Now()
	c := start(t, dir)
	t.Logf("ready again in %s", time.Since(begun))
	execute(t, c.URL("epitally"), "SELECT a FROM kept")
}

func TestEpitallyAndServerKilledAtOnce(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	cmd, url := startHelper(t, dir)
	execute(t, url, "CREATE TABLE kept AS SELECT 1 AS a")
	old := postmaster(t, dir)
	// The server first: the kernel's signal would let it end in good order.
	if err := syscall.Kill(old, syscall.SIGKILL); err != nil {
		t.Fatal(err)
	}
	if err := cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	cmd.Wait() // its error is the kill
	c := start(t, dir)
	execute(t, c.URL("epitally"), "SELECT a FROM kept")
}

// An orphan that the kernel did not end, as on systems without that service.
func TestAnOrphanIsTakenOver(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	first := start(t, dir)
	execute(t, first.URL("epitally"), "CREATE TABLE kept AS SELECT 1 AS a")
	old := postmaster(t, dir)
	close(first.stop) // its supervisor no longer cares
	first.lock.Close()
	second := start(t, dir)
	execute(t, second.URL("epitally"), "SELECT a FROM kept")
	if now := postmaster(t, dir); now == old {
		t.Errorf("the orphan, process %d, still runs", old)
	}
	first.once.Do(func() {}) // nothing left to stop
}

func TestAPidFileOfAnotherProcessIsDefused(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	c := start(t, dir)
	// What a killed server leaves: its number, in the folder and beside the socket.
	paths := []string{filepath.Join(dir, "server", "postmaster.pid"), filepath.Join(dir, "socket", socketFile+".lock")}
	var texts []string
	for _, path := range paths {
		text, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		texts = append(texts, string(text))
	}
	if err := c.Stop(t.Context()); err != nil {
		t.Fatal(err)
	}
	// A process of the server's own account, which PostgreSQL would believe in.
	other := exec.Command("sleep", "60")
	other.Dir = "/"
	other.SysProcAttr = attributes(c.account, false)
	if err := other.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { other.Process.Kill(); other.Wait() })
	for i, path := range paths {
		_, rest, _ := strings.Cut(texts[i], "\n")
		if err := os.WriteFile(path, []byte(strconv.Itoa(other.Process.Pid)+"\n"+rest), 0o600); err != nil {
			t.Fatal(err)
		}
		if c.account.switched {
			if err := os.Chown(path, int(c.account.uid), int(c.account.gid)); err != nil {
				t.Fatal(err)
			}
		}
	}
	again := start(t, dir)
	execute(t, again.URL("epitally"), "SELECT 1")
	if !alive(other.Process.Pid) {
		t.Error("the other process was ended")
	}
}

func TestAnotherVersionsFolderIsRefused(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	if err := os.MkdirAll(filepath.Join(dir, "server"), 0o700); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "server", "PG_VERSION"), []byte("9\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	_, err := Start(t.Context(), Options{DataDir: dir})
	if !errors.Is(err, analytics.ErrConflict) || !strings.Contains(err.Error(), "PostgreSQL 9") || !strings.Contains(err.Error(), "--data") {
		t.Fatalf("got %v", err)
	}
}

func TestAFolderOfSomethingElseIsLeftAlone(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	mine := filepath.Join(dir, "server", "letters.txt")
	if err := os.MkdirAll(filepath.Dir(mine), 0o700); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(mine, []byte("dear"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := Start(t.Context(), Options{DataDir: dir}); !errors.Is(err, analytics.ErrConflict) {
		t.Fatalf("got %v", err)
	}
	if _, err := os.Stat(mine); err != nil {
		t.Error(err)
	}
}

func TestALongPathUsesAShortSocketFolder(t *testing.T) {
	t.Parallel()
	dir := filepath.Join(t.TempDir(), strings.Repeat("long", 25))
	c := start(t, dir)
	execute(t, c.URL("epitally"), "SELECT 1")
	socket := c.socketDir
	if strings.HasPrefix(socket, dir) {
		t.Errorf("socket folder %s", socket)
	}
	if info, err := os.Stat(socket); err != nil || info.Mode().Perm() != 0o700 {
		t.Errorf("socket folder: %v %v", info, err)
	}
	if err := c.Stop(t.Context()); err != nil {
		t.Fatal(err)
	}
	if _, err := os.Stat(socket); !os.IsNotExist(err) {
		t.Errorf("the socket folder stays: %v", err)
	}
}

func TestRootsClosedFolder(t *testing.T) {
	t.Parallel()
	if os.Geteuid() != 0 {
		t.Skip("only root has folders that the server's account may not pass")
	}
	closed := filepath.Join(t.TempDir(), "closed")
	if err := os.Mkdir(closed, 0o700); err != nil {
		t.Fatal(err)
	}
	dir := filepath.Join(closed, "data", "postgres")
	if passCapability() == 0 {
		if _, err := Start(t.Context(), Options{DataDir: dir}); !errors.Is(err, analytics.ErrUnavailable) || !strings.Contains(err.Error(), closed) {
			t.Fatalf("got %v", err)
		}
		return
	}
	c := start(t, dir)
	execute(t, c.URL("epitally"), "CREATE TABLE kept AS SELECT 1 AS a")
	if !c.blocked || !c.account.switched {
		t.Errorf("blocked %v, switched %v", c.blocked, c.account.switched)
	}
	if err := c.Stop(t.Context()); err != nil {
		t.Fatal(err)
	}
	again := start(t, dir)
	execute(t, again.URL("epitally"), "SELECT a FROM kept")
}

func TestFindSaysWhatToInstall(t *testing.T) {
	t.Parallel()
	_, err := findIn([]string{t.TempDir()}, func(int) bool { return true })
	if !errors.Is(err, analytics.ErrNotFound) || !strings.Contains(err.Error(), "apt-get install postgresql") {
		t.Fatalf("got %v", err)
	}
	p, err := Find()
	if err != nil {
		t.Fatal(err)
	}
	_, err = findIn([]string{p.Dir}, func(int) bool { return false })
	if !errors.Is(err, analytics.ErrNotFound) || !strings.Contains(err.Error(), "too old") {
		t.Fatalf("got %v", err)
	}
}

func TestParseMajor(t *testing.T) {
	t.Parallel()
	for text, want := range map[string]int{
		"postgres (PostgreSQL) 15.9 (Debian 15.9-1.pgdg120+1)\n": 15,
		"postgres (PostgreSQL) 17beta1":                          17,
	} {
		if got, err := parseMajor(text); err != nil || got != want {
			t.Errorf("%q: %d, %v", text, got, err)
		}
	}
	if _, err := parseMajor("something else"); err == nil {
		t.Error("no error")
	}
}
