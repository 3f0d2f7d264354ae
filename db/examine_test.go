package db_test

import (
	"strings"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"epitally/db"
	"epitally/db/dbtest"
)

// TestExaminationFindsWhatIsWrong breaks a sound database in the ways that hands,
// disks and half-restored backups break them.
func TestExaminationFindsWhatIsWrong(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ name, sql, check, says string }{
		{"sound", ``, "", ""},
		{"a measurement deleted", `DELETE FROM measurement WHERE id = (SELECT min(id) FROM measurement)`, "orphans", "rows of plane belong to no measurement"},
		{"a number lost", `DELETE FROM measurement_key`, "orphans", "2 measurements cannot be found by their number"},
		{"a plane cut short", `UPDATE plane SET data = substr(data, 1, 7) WHERE quantity = 'fwhm_nm'`, "planes", "2 planes cannot be decoded, as fwhm_nm of measurement"},
		{"a count changed", `UPDATE measurement SET dies = dies + 1`, "counts", "planes have another number of dies than their measurement"},
		{"two current", `UPDATE measurement SET is_current = false`, "current measurements", "not exactly one measurement of a kind is current"},
		{"derived numbers wait", `UPDATE measurement SET stale = true`, "current measurements", "2 measurements wait for their derived numbers"},
		{"a partition dropped", `DROP TABLE tally_2026_12`, "partitions", "the partitions [tally_2026_12] are missing"},
		{"a document spoilt", `INSERT INTO spec (name, version, title, kind, products, document, latest) VALUES ('x', 1, '', 'pl', '{}', 'kind: pl', true)`, "documents", "specification x version 1 cannot be read"},
	} {
		t.Run(c.name, func(t *testing.T) {
			t.Parallel()
			url := dbtest.URL(t)
			s, err := db.Open(t.Context(), db.Config{URL: url})
			if err != nil {
				t.Fatal(err)
			}
			defer s.Close()
			peakWafer(t, s, "W-1", 450)
			peakWafer(t, s, "W-2", 452)
			now := time.Date(2026, 11, 20, 0, 0, 0, 0, time.UTC)
			conn, err := pgx.Connect(t.Context(), url)
			if err != nil {
				t.Fatal(err)
			}
			defer conn.Close(t.Context())
			if _, err := conn.Exec(t.Context(), `SELECT ensure_month('2026-11-01'), ensure_month('2026-12-01')`); err != nil {
				t.Fatal(err)
			}
			if _, err := conn.Exec(t.Context(), c.sql); err != nil {
				t.Fatal(err)
			}
			decoded := 0
			found, err := s.Examine(t.Context(), db.Examination{Planes: true, Now: now, Progress: func(done, _ int) { decoded = done }})
			if err != nil {
				t.Fatal(err)
			}
			if decoded != 4 {
				t.Errorf("%d planes were decoded, want 4", decoded)
			}
			if c.check == "" {
				if len(found) != 0 {
					t.Errorf("%+v", found)
				}
				return
			}
			for _, f := range found {
				if f.Check == c.check && strings.Contains(f.Says, c.says) && f.Remedy != "" && f.Count > 0 {
					return
				}
			}
			t.Errorf("want %s: %s; found %+v", c.check, c.says, found)
		})
	}
}
