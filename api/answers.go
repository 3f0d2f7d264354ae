package api

import (
	"bytes"
	"crypto/sha256"
	stdcsv "encoding/csv"
	"encoding/hex"
	"encoding/json"
	"fmt"
	"io"
	"math"
	"net/http"
	"net/url"
	"strconv"
	"strings"
	"time"

	"github.com/labstack/echo/v4"
)

// Media types.
const (
	mediaJSON  = "application/json"
	mediaCSV   = "text/csv; charset=utf-8"
	mediaPNG   = "image/png"
	mediaBytes = "application/octet-stream"
	mediaYAML  = "application/yaml"
	mediaPlane = "application/vnd.epitally.plane"
	mediaGrid  = "application/vnd.epitally.grid"
)

// Lifetimes of what may be kept. A grid's address is its content. A plane and a
// version never change either, but their addresses are numbers of one database,
// and a database that is made anew counts from 1 again: hence a day, not a year.
const (
	keepContent = "public, max-age=31536000, immutable"
	keepNumber  = "private, max-age=86400, immutable"
	askAgain    = "private, no-cache"
)

// answerJSON writes v whole or, when it cannot be written as JSON, not at all.
func answerJSON(c echo.Context, status int, media string, v any) error {
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false)
	if err := enc.Encode(v); err != nil {
		return err
	}
	return c.Blob(status, media, b.Bytes())
}

// table is the CSV form of an answer.
type table struct {
	columns []string
	rows    [][]string
}

func (t *table) add(cells ...any) {
	row := make([]string, len(cells))
	for i, v := range cells {
		row[i] = cell(v)
	}
	t.rows = append(t.rows, row)
}

// cell writes a value as CSV has it: nothing for nil and NaN, times in RFC 3339.
func cell(v any) string {
	switch v := v.(type) {
	case nil:
		return ""
	case string:
		return v
	case float64:
		if math.IsNaN(v) {
			return ""
		}
		return strconv.FormatFloat(v, 'f', -1, 64)
	case *float64:
		if v == nil {
			return ""
		}
		return cell(*v)
	case *int:
		if v == nil {
			return ""
		}
		return strconv.Itoa(*v)
	case time.Time:
		return v.Format(time.RFC3339)
	case *time.Time:
		if v == nil {
			return ""
		}
		return v.Format(time.RFC3339)
	}
	return fmt.Sprint(v)
}

func (t *table) writeTo(w io.Writer) error {
	cw := stdcsv.NewWriter(w)
	if err := cw.Write(t.columns); err != nil {
		return err
	}
	return cw.WriteAll(t.rows)
}

// answerTable answers with v as JSON, or with what makeTable gives as CSV.
func answerTable(c echo.Context, format string, v any, makeTable func() table) error {
	if chooseFormat(c, format, "json", "csv") == "json" {
		return answerJSON(c, http.StatusOK, mediaJSON, v)
	}
	var b bytes.Buffer
	t := makeTable()
	if err := t.writeTo(&b); err != nil {
		return err
	}
	return c.Blob(http.StatusOK, mediaCSV, b.Bytes())
}

// formatMedia is the media type of each word that format= takes.
var formatMedia = map[string]string{"json": mediaJSON, "csv": "text/csv", "yaml": mediaYAML, "plane": mediaPlane, "grid": mediaGrid, "parquet": mediaParquet, "xlsx": mediaXLSX}

// chooseFormat gives the word asked for with format=, else the offer that the
// Accept header weighs highest, else the first offer, which is also the answer
// to a header that nothing here satisfies.
func chooseFormat(c echo.Context, asked string, offers ...string) string {
	c.Response().Header().Add("Vary", "Accept")
	if asked != "" {
		return asked
	}
	chosen, best := offers[0], 0.0
	accepted := strings.Split(strings.Join(c.Request().Header.Values("Accept"), ","), ",")
	for _, offer := range offers {
		specific, weight := -1, 0.0
		for _, item := range accepted {
			name, q := weighted(item)
			if s := specificity(strings.ToLower(name), formatMedia[offer]); s > specific {
				specific, weight = s, q
			}
		}
		if weight > best {
			chosen, best = offer, weight
		}
	}
	return chosen
}

// specificity says how closely a media range names media: 2 itself, 1 its
// kind, 0 anything, -1 not at all.
func specificity(mediaRange, media string) int {
	kind, _, _ := strings.Cut(media, "/")
	switch mediaRange {
	case media:
		return 2
	case kind + "/*":
		return 1
	case "*/*":
		return 0
	}
	return -1
}

// tagOf is a strong ETag made from everything an answer depends on.
func tagOf(parts ...any) string {
	h := sha256.New()
	for _, p := range parts {
		fmt.Fprintf(h, "%v\x00", p)
	}
	return `"` + hex.EncodeToString(h.Sum(nil)[:12]) + `"`
}

// unchanged sets the ETag and how long the answer may be kept, and says whether
// the reader has this very answer; then 304 is all that is left to answer.
func unchanged(c echo.Context, tag, keep string) bool {
	h := c.Response().Header()
	h.Set("ETag", tag)
	h.Set("Cache-Control", keep)
	for _, item := range strings.Split(strings.Join(c.Request().Header.Values("If-None-Match"), ","), ",") {
		if item = strings.TrimPrefix(strings.TrimSpace(item), "W/"); item == tag || item == "*" {
			return true
		}
	}
	return false
}

func notModified(c echo.Context) error { return c.NoContent(http.StatusNotModified) }

// linkNext names the next page of a list in the Link header (RFC 8288), which
// CSV needs and JSON may use.
func linkNext(c echo.Context, cursor string) {
	if cursor == "" {
		return
	}
	q := c.Request().URL.Query()
	q.Set("cursor", cursor)
	u := url.URL{Path: c.Request().URL.Path, RawPath: c.Request().URL.RawPath, RawQuery: q.Encode()}
	c.Response().Header().Set("Link", "<"+u.String()+`>; rel="next"`)
}

// download names the file that a browser saves an answer under.
func download(c echo.Context, name string) {
	c.Response().Header().Set("Content-Disposition", "attachment; filename*=UTF-8''"+url.PathEscape(name))
}
