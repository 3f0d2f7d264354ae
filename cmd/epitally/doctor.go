package main

import (
	"context"
	"encoding/json"
	"fmt"
	"os"
	"time"

	"epitally/db"
)

// doctor examines a database and says what is wrong in it and what to do. It
// changes nothing, and may look while a server runs.
func doctor(ctx context.Context, c *console, args []string) error {
	config := defaultConfig()
	var quick, asJSON bool
	config.LogLevel = "error"
	f := flagsFor("doctor", &config)
	f.BoolVar(&quick, "quick", false, "do not decode every plane")
	f.BoolVar(&asJSON, "json", false, "print JSON")
	for _, serving := range []string{"listen", "drop", "scan", "settle-seconds", "workers", "stop-seconds", "max-file-mb", "zone"} {
		f.MarkHidden(serving) // they may stand in the settings' file, and mean nothing here
	}
	if err := config.resolve(f, args, os.Getenv); err != nil {
		return err
	}
	if f.NArg() > 0 {
		return fmt.Errorf("doctor: %q is not a flag; see doctor --help", f.Arg(0))
	}
	return withStore(ctx, c, config, func(store *db.Store) error {
		bar := newCountBar(c, "decoding planes")
		found, err := store.Examine(ctx, db.Examination{Planes: !quick, Now: time.Now(), Progress: func(done, total int) { setBar(bar, done, total) }})
		if err != nil {
			return err
		}
		bar.Finish()
		return sayComplaints(c, found, quick, asJSON)
	})
}

func sayComplaints(c *console, found []db.Complaint, quick, asJSON bool) error {
	if asJSON {
		if found == nil {
			found = []db.Complaint{}
		}
		out := json.NewEncoder(c.out)
		out.SetIndent("", " ")
		if err := out.Encode(found); err != nil {
			return err
		}
	} else {
		for _, f := range found {
			fmt.Fprintf(c.out, "%s: %s\n  what to do: %s\n", f.Check, f.Says, f.Remedy)
		}
		if len(found) == 0 {
			looked := "every plane decodes, counts match, nothing is orphaned, the partitions are there"
			if quick {
				looked = "counts match, nothing is orphaned, the partitions are there; planes were not decoded"
			}
			fmt.Fprintln(c.out, "The database is sound: "+looked+".")
		}
	}
	if len(found) > 0 {
		return errSaid
	}
	return nil
}
