package localpg

import (
	"errors"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"time"
)

const (
	// maxLogBytes is the size at which the server's log begins anew; one older
	// part is kept beside it, so the two stay near twice this size.
	maxLogBytes = 8 << 20
	logLookEach = time.Minute
)

func (c *Cluster) logPath() string { return filepath.Join(c.dir, "postgres.log") }

// openLog opens the server's log to append to.
func (c *Cluster) openLog() (*os.File, error) {
	if err := limitLog(c.logPath(), maxLogBytes); err != nil {
		return nil, err
	}
	return os.OpenFile(c.logPath(), os.O_CREATE|os.O_WRONLY|os.O_APPEND, 0o600)
}

// watchLog keeps the log small while the server runs, until ended is closed.
func (c *Cluster) watchLog(ended <-chan struct{}) {
	tick := time.NewTicker(logLookEach)
	defer tick.Stop()
	for {
		select {
		case <-ended:
			return
		case <-tick.C:
			if err := limitLog(c.logPath(), maxLogBytes); err != nil {
				c.log.Warn("the database server's log cannot be begun anew", "error", err, "log", c.logPath())
			}
		}
	}
}

// limitLog moves what a log over the limit holds to NAME.1 and empties it. It
// copies, since a running server keeps writing, at the end, to the file it has
// open; lines written between copying and emptying are lost.
func limitLog(path string, limit int64) (err error) {
	info, err := os.Stat(path)
	if errors.Is(err, fs.ErrNotExist) || err == nil && info.Size() <= limit {
		return nil
	}
	if err != nil {
		return err
	}
	from, err := os.Open(path)
	if err != nil {
		return err
	}
	defer from.Close()
	// A log that grew far over the limit in one step is kept by its end only.
	if over := info.Size() - limit; over > 0 {
		if _, err := from.Seek(over, io.SeekStart); err != nil {
			return err
		}
	}
	to, err := os.OpenFile(path+".1", os.O_CREATE|os.O_WRONLY|os.O_TRUNC, 0o600)
	if err != nil {
		return err
	}
	_, err = io.Copy(to, from)
	if err := errors.Join(err, to.Close()); err != nil {
		return err
	}
	return os.Truncate(path, 0)
}

// logTail is the last lines of the log, for an error message.
func (c *Cluster) logTail() string {
	text, err := os.ReadFile(c.logPath())
	if err != nil {
		return err.Error()
	}
	return lastLines(string(text))
}
