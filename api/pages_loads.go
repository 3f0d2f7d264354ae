package api

import (
	"context"
	"fmt"
	"regexp"
	"strconv"
	"strings"
	"time"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/db"
	"epitally/web"
)

// reasonsCompared is how many of the newest refusals the first sentence looks
// through for a cause they share.
const reasonsCompared = 500

// sourceStates are those that a source is recorded with.
var sourceStates = []string{db.SourceStored, db.SourceRefused}

func (s *Server) pageLoads(c echo.Context) error {
	ctx := c.Request().Context()
	state, cursor := queryText(c, "state"), c.QueryParam("cursor")
	rows, next, err := s.store.Sources(ctx, state, 50, cursor)
	if err != nil {
		return err
	}
	found, err := s.lastHour(ctx)
	if err != nil {
		return err
	}
	found.Ever = found.Ever || len(rows) > 0
	page := web.LoadsPage{Base: s.base(c, web.Base{Title: "Loads", Section: "loads"}), Empty: !found.Ever}
	found.Basis = "Sources seen in the hour before " + page.MadeAt
	page.Finding = web.LoadsSentence(found)
	page.States = append(page.States, web.Fact{Name: "all", Href: hrefUnless(state == "", "/loads")})
	for _, st := range sourceStates {
		page.States = append(page.States, web.Fact{Name: st, Href: hrefUnless(state == st, listURL("/loads", "state", st))})
	}
	for i := range rows {
		page.Rows = append(page.Rows, s.loadLine(&rows[i]))
	}
	if next != "" {
		page.OlderURL = listURL("/loads", "state", state, "cursor", next)
	}
	if cursor != "" {
		page.FirstURL = listURL("/loads", "state", state)
	}
	return s.render(c, "loads", page)
}

func hrefUnless(here bool, href string) string {
	if here {
		return ""
	}
	return href
}

// lastHour counts what became of the files seen in the hour before now, and
// finds the cause that most refusals share.
func (s *Server) lastHour(ctx context.Context) (f web.LoadsFound, err error) {
	since := s.now().Add(-time.Hour)
	counts, err := s.store.SourceCounts(ctx, since)
	if err != nil {
		return f, err
	}
	refused, _, err := s.store.Sources(ctx, db.SourceRefused, reasonsCompared, "")
	if err != nil {
		return f, err
	}
	f = web.LoadsFound{Stored: counts[db.SourceStored], Refused: counts[db.SourceRefused], Ever: len(counts) > 0,
		RefusedURL: listURL("/loads", "state", db.SourceRefused), StoredURL: listURL("/loads", "state", db.SourceStored)}
	reasons := map[string]int{}
	for i := range refused {
		src := &refused[i]
		if src.SeenAt.Before(since) {
			continue
		}
		cause := sameButNames.ReplaceAllString(reasonOf(src), "…")
		reasons[cause]++
		if n := reasons[cause]; n > f.Sharing {
			f.SharedCause, f.Sharing = cause, n
			if n == 1 {
				f.SharedCause = reasonOf(src)
			}
		}
	}
	if f.Sharing == 1 && f.Refused > 1 {
		f.SharedCause = ""
	}
	return f, nil
}

// sameButNames finds what differs between reasons of one cause: quoted text and
// numbers.
var sameButNames = regexp.MustCompile(`"[^"]*"|\b\d+\b`)

// reasonOf is why a source was refused, without its own name and the place
// before it: pages say both beside it.
func reasonOf(src *db.Source) string {
	reason := strings.TrimPrefix(src.Reason, src.Name+": ")
	return strings.TrimPrefix(strings.TrimPrefix(reason, "at "), placeWords(src)+": ")
}

func (s *Server) loadLine(src *db.Source) web.LoadLine {
	line := web.LoadLine{Name: src.Name, Href: "/loads/" + strconv.FormatInt(src.ID, 10), State: src.State, Format: src.Format,
		SeenAt: web.Moment(src.SeenAt, s.zone), Bytes: web.Bytes(src.Bytes), Wafers: web.Count(src.Wafers), Dies: web.Count(src.Dies),
		Reason: reasonOf(src), Place: placeWords(src), Notices: len(src.Notices)}
	if src.State != db.SourceStored {
		line.Wafers, line.Dies = "", ""
	}
	return line
}

// placeWords says where in the source it went wrong; "" when that is not known.
func placeWords(src *db.Source) string {
	switch {
	case src.Line > 0 && src.Column > 0:
		return fmt.Sprintf("line %d, column %d", src.Line, src.Column)
	case src.Line > 0:
		return fmt.Sprintf("line %d", src.Line)
	case src.Offset > 0:
		return fmt.Sprintf("byte %d", src.Offset)
	}
	return ""
}

func (s *Server) pageLoad(c echo.Context) error {
	id, err := strconv.ParseInt(c.Param("id"), 10, 64)
	if err != nil {
		return fmt.Errorf("there is no load %q: its number stands under Loads: %w", c.Param("id"), analytics.ErrNotFound)
	}
	src, err := s.store.Source(c.Request().Context(), id)
	if err != nil {
		return missing(err, "there is no load %d: its number stands under Loads", id)
	}
	page := web.LoadPage{Name: src.Name, State: src.State, Reason: reasonOf(src), Place: placeWords(src), Notices: src.Notices}
	page.Base = s.base(c, web.Base{Title: src.Name, Section: "loads", Finding: web.LoadSentence(src.Name, src.State, src.Wafers, src.Dies)})
	add := func(name, value string) {
		if value != "" {
			page.Facts = append(page.Facts, web.Fact{Name: name, Value: value})
		}
	}
	add("seen", web.Moment(src.SeenAt, s.zone))
	if src.StoredAt != nil {
		add(src.State, web.Moment(*src.StoredAt, s.zone)) // when it came to its end, stored or refused
	}
	add("size", web.Bytes(src.Bytes))
	add("format", src.Format)
	add("reading profile", src.Profile)
	add("SHA-256 of its bytes", src.SHA256)
	return s.render(c, "load", page)
}
