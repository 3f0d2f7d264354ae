package localpg

import (
	"context"
	"path/filepath"
	"time"

	"github.com/jackc/pgx/v5"
)

// attachLimit bounds how long Attach waits for the server's answer.
const attachLimit = 5 * time.Second

// Attach gives the URL of the database "epitally" in dataDir, the folder that
// Options.DataDir names, when another Epitally is at work there and its server
// answers; so a second program can use the cluster beside the one that runs it.
// ok is false when nobody is at work there, when the server does not answer yet,
// and when this account may not look into the folder.
//
// The one who runs the cluster may stop it at any time: connections then break.
func Attach(dataDir string) (url string, ok bool) {
	dir, err := filepath.EvalSymlinks(dataDir)
	if err != nil || !lockHeld(filepath.Join(dir, lockName)) {
		return "", false
	}
	f, err := readPidFile(filepath.Join(dir, serverName, pidName))
	if err != nil || f == nil || f.socketDir == "" {
		return "", false
	}
	url = urlOf(f.socketDir, defaultDatabase)
	ctx, cancel := context.WithTimeout(context.Background(), attachLimit)
	defer cancel()
	conn, err := pgx.Connect(ctx, url)
	if err != nil {
		return "", false
	}
	conn.Close(ctx) // it answered; how it says goodbye does not matter
	return url, true
}
