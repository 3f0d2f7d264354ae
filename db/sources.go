package db

import (
	"context"
	"encoding/base64"
	"encoding/hex"
	"fmt"
	"strconv"
	"time"
	"unicode/utf8"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"epitally/analytics"
)

// execer is a pool or a transaction.
type execer interface {
	Exec(ctx context.Context, sql string, args ...any) (pgconn.CommandTag, error)
}

func insertSource(ctx context.Context, q execer, src Source) error {
	hash, err := hashBytes(src.SHA256)
	if err != nil {
		return err
	}
	notices := make([]string, 0, len(src.Notices))
	for _, n := range src.Notices {
		notices = append(notices, storable(n))
	}
	_, err = q.Exec(ctx, `
		INSERT INTO source (id, name, sha256, bytes, format, state, reason, line, column_no, byte_offset, profile, seen_at, wafers, dies, notices)
		VALUES (coalesce(nullif($1::bigint, 0), nextval('source_id_seq')), $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15)`,
		src.ID, storable(src.Name), hash, src.Bytes, src.Format, src.State, storable(src.Reason), src.Line, src.Column, src.Offset,
		storable(src.Profile), src.SeenAt, src.Wafers, src.Dies, notices)
	return err
}

// storable keeps what Postgres cannot hold as text (NUL, bytes that are no
// UTF-8, as a file's name may have) visible instead of failing on it.
func storable(s string) string {
	clean := utf8.ValidString(s)
	for i := 0; clean && i < len(s); i++ {
		clean = s[i] != 0
	}
	if clean {
		return s
	}
	quoted := strconv.QuoteToASCII(s)
	return quoted[1 : len(quoted)-1]
}

// RefuseSource records a source that could not be read.
func (s *Store) RefuseSource(ctx context.Context, src Source) (id int64, err error) {
	defer wrap(&err, "record refusal of %s", src.Name)
	if err := s.pool.QueryRow(ctx, `SELECT nextval('source_id_seq')`).Scan(&id); err != nil {
		return 0, err
	}
	src.ID, src.State = id, SourceRefused
	return id, insertSource(ctx, s.pool, src)
}

const selectSource = `
	SELECT id, name, sha256, bytes, format, state, reason, line, column_no, byte_offset, profile, seen_at, ended_at, wafers, dies, notices
	FROM source`

func scanSource(row pgx.CollectableRow) (src Source, err error) {
	var hash []byte
	err = row.Scan(&src.ID, &src.Name, &hash, &src.Bytes, &src.Format, &src.State, &src.Reason, &src.Line, &src.Column, &src.Offset,
		&src.Profile, &src.SeenAt, &src.StoredAt, &src.Wafers, &src.Dies, &src.Notices)
	src.SHA256 = hex.EncodeToString(hash)
	return src, err
}

func (s *Store) oneSource(ctx context.Context, where string, args ...any) (*Source, error) {
	rows, err := s.pool.Query(ctx, selectSource+where, args...)
	if err != nil {
		return nil, err
	}
	src, err := pgx.CollectExactlyOneRow(rows, scanSource)
	return &src, err
}

// SourceByHash finds a stored source by the hex SHA-256 of its bytes;
// analytics.ErrNotFound when there is none.
func (s *Store) SourceByHash(ctx context.Context, sha256 string) (src *Source, err error) {
	defer wrap(&err, "source with SHA-256 %s", sha256)
	hash, err := hashBytes(sha256)
	if err != nil {
		return nil, err
	}
	return s.oneSource(ctx, ` WHERE sha256 = $1 AND state = 'stored'`, hash)
}

// Source finds one by its number.
func (s *Store) Source(ctx context.Context, id int64) (src *Source, err error) {
	defer wrap(&err, "source %d", id)
	return s.oneSource(ctx, ` WHERE id = $1`, id)
}

// SourceCounts counts the sources seen since a time by their state.
func (s *Store) SourceCounts(ctx context.Context, since time.Time) (counts map[string]int, err error) {
	defer wrap(&err, "count sources since %s", since.UTC().Format(time.RFC3339))
	return countsBy(s.pool.Query(ctx, `SELECT state, count(*) FROM source WHERE seen_at >= $1 GROUP BY state`, since))
}

// countsBy collects rows of a word and its count.
func countsBy(rows pgx.Rows, err error) (map[string]int, error) {
	if err != nil {
		return nil, err
	}
	counts := map[string]int{}
	var word string
	var n int
	_, err = pgx.ForEachRow(rows, []any{&word, &n}, func() error {
		counts[word] = n
		return nil
	})
	return counts, err
}

// Sources lists newest first. state "" = all. Cursor and limit as in Wafers.
func (s *Store) Sources(ctx context.Context, state string, limit int, cursor string) (list []Source, next string, err error) {
	defer wrap(&err, "list sources")
	if limit, err = limitOf(limit); err != nil {
		return nil, "", err
	}
	before := int64(1<<63 - 1)
	if cursor != "" {
		text, err := base64.RawURLEncoding.DecodeString(cursor)
		if err == nil {
			before, err = strconv.ParseInt(string(text), 10, 64)
		}
		if err != nil {
			return nil, "", fmt.Errorf("%w: %w", errCursor, analytics.ErrInvalid)
		}
	}
	rows, err := s.pool.Query(ctx, selectSource+` WHERE id < $1 AND ($2 = '' OR state = $2) ORDER BY id DESC LIMIT $3`, before, state, limit+1)
	if err != nil {
		return nil, "", err
	}
	if list, err = pgx.CollectRows(rows, scanSource); err != nil {
		return nil, "", err
	}
	if len(list) > limit {
		list = list[:limit]
		next = base64.RawURLEncoding.EncodeToString([]byte(strconv.FormatInt(list[limit-1].ID, 10)))
	}
	if list == nil {
		list = []Source{}
	}
	return list, next, nil
}
