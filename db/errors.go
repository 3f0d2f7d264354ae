package db

import (
	"context"
	"errors"
	"fmt"
	"net"
	"strings"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"epitally/analytics"
)

// translate turns a driver's error into a kind of package analytics, by code
// and constraint name. Errors of the caller's context stay what they are.
func translate(err error) error {
	if err == nil || errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded) {
		return err
	}
	kind := kindOf(err)
	if kind == nil || errors.Is(err, kind) {
		return err
	}
	return fmt.Errorf("%w: %w", kind, err)
}

func kindOf(err error) error {
	var pg *pgconn.PgError
	switch {
	case errors.Is(err, pgx.ErrNoRows):
		return analytics.ErrNotFound
	case errors.As(err, &pg):
		return kindOfCode(pg)
	}
	var connect *pgconn.ConnectError
	var network net.Error
	if errors.As(err, &connect) || errors.As(err, &network) || pgconn.SafeToRetry(err) || brokenOff(err) {
		return analytics.ErrUnavailable
	}
	return nil
}

func kindOfCode(pg *pgconn.PgError) error {
	switch {
	case pg.Code == "23505" && pg.ConstraintName == "source_once":
		return analytics.ErrDuplicate
	case pg.Code == "23505", pg.Code == "23503":
		return analytics.ErrConflict
	case pg.Code == "40P01", pg.Code == "40001", pg.Code == "55P03", // deadlock, serialization, lock timeout
		pg.Code == "57014",                                         // the statement timeout
		pg.Code == "57P01", pg.Code == "57P02", pg.Code == "57P03", // the server stops, crashed, or starts
		strings.HasPrefix(pg.Code, "53"), // out of disk, memory, connections
		strings.HasPrefix(pg.Code, "08"): // connection
		return analytics.ErrUnavailable
	case strings.HasPrefix(pg.Code, "22"):
		return analytics.ErrInvalid
	}
	return nil
}

// wrap names the operation and translates: defer wrap(&err, "wafer %s", name).
func wrap(err *error, format string, args ...any) {
	if *err != nil {
		*err = fmt.Errorf("%s: %w", fmt.Sprintf(format, args...), translate(*err))
	}
}
