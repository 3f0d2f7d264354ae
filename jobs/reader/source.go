package reader

import (
	"bufio"
	"bytes"
	"compress/bzip2"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"hash"
	"io"
	"syscall"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"epitally/analytics"
)

const (
	blockBytes = 256 << 10
	// blocks of a feed: one being parsed, one being filled, one waiting.
	blockCount = 3
	// maxZstdWindow is the window of zstd's highest ordinary level.
	maxZstdWindow = 128 << 20
)

// source is the decompressed bytes of an input: it counts and hashes what is
// read from it. It is an io.Reader, and a feed reads it ahead of a parser.
type source struct {
	raw    *rawReader
	text   *bufio.Reader // decompressed
	closer io.Closer
	format string // gzip, zstd, bzip2 or "" = not compressed
	limit  int64
	bytes  int64
	hash   hash.Hash
	err    error // why reading ended; io.EOF at the proper end
}

// openSource tells the compression by the first bytes. The source is usable, as
// one that is at its end, even when the error is not nil.
func openSource(r io.Reader, limit int64) (*source, error) {
	s := &source{raw: &rawReader{r: r}, limit: limit, hash: sha256.New()}
	text, err := s.decompressor()
	if err != nil {
		s.err = s.fault(err)
		return s, s.err
	}
	s.closer, s.text = text, bufio.NewReaderSize(text, 64<<10)
	return s, nil
}

func (s *source) decompressor() (io.ReadCloser, error) {
	head := bufio.NewReaderSize(s.raw, 64<<10)
	magic, err := head.Peek(4)
	if err != nil && err != io.EOF {
		return nil, err
	}
	switch {
	case bytes.HasPrefix(magic, []byte{0x1f, 0x8b}):
		s.format = "gzip"
		z, err := gzip.NewReader(head)
		if err == io.EOF {
			err = io.ErrUnexpectedEOF
		}
		return z, err
	case bytes.HasPrefix(magic, []byte{0x28, 0xb5, 0x2f, 0xfd}):
		s.format = "zstd"
		// Concurrency 1 decodes without goroutines of its own.
		z, err := zstd.NewReader(head, zstd.WithDecoderConcurrency(1), zstd.WithDecoderMaxWindow(maxZstdWindow))
		if err != nil {
			return nil, err
		}
		return z.IOReadCloser(), nil
	case bytes.HasPrefix(magic, []byte("BZh")):
		s.format = "bzip2"
		return io.NopCloser(bzip2.NewReader(head)), nil
	}
	return io.NopCloser(head), nil
}

// Read gives decompressed bytes, io.EOF at the end, else a Fault.
func (s *source) Read(p []byte) (int, error) {
	if s.err != nil {
		return 0, s.err
	}
	n, err := s.text.Read(p)
	if s.bytes += int64(n); s.bytes > s.limit {
		s.err = &analytics.Fault{Offset: s.limit, Kind: analytics.ErrTooLarge,
			Problem: fmt.Sprintf("the source holds over %d bytes once decompressed", s.limit), Remedy: "split it, or raise the limit"}
		return 0, s.err
	}
	s.hash.Write(p[:n])
	if err != nil {
		s.err = s.fault(err)
	}
	return n, s.err
}

// peek gives the next n bytes, or as many as are left, without taking them.
func (s *source) peek(n int) ([]byte, error) {
	if s.err != nil {
		return nil, s.err
	}
	b, err := s.text.Peek(n)
	if err != nil && len(b) == 0 {
		s.err = s.fault(err)
		return nil, s.err
	}
	return b, nil
}

// drain reads to the end, so that the hash covers everything, unless ctx ends.
func (s *source) drain(ctx context.Context) {
	block := make([]byte, 64<<10)
	for s.err == nil && ctx.Err() == nil {
		s.Read(block)
	}
}

// sum reports the size, and the hash in hex when everything was read.
func (s *source) sum() (int64, string) {
	if s.err != io.EOF {
		return s.bytes, ""
	}
	return s.bytes, hex.EncodeToString(s.hash.Sum(nil))
}

func (s *source) close() {
	if s.closer != nil {
		s.closer.Close()
	}
}

// fault says why reading ended.
func (s *source) fault(err error) error {
	switch {
	case s.raw.err != nil && s.raw.err != io.EOF:
		return s.raw.fault(s.bytes)
	case err == io.EOF:
		return io.EOF
	case errors.Is(err, io.ErrUnexpectedEOF):
		return &analytics.Fault{Offset: s.bytes, Problem: fmt.Sprintf("the %s data is cut short", s.format), Remedy: "copy the whole file again"}
	}
	return &analytics.Fault{Offset: s.bytes, Problem: fmt.Sprintf("the %s data is damaged (%v)", s.format, err), Remedy: "compress the file again, or copy it anew"}
}

// rawReader remembers its reader's error, so that a failing disk is told from
// damaged data.
type rawReader struct {
	r   io.Reader
	err error
}

func (r *rawReader) Read(p []byte) (int, error) {
	n, err := r.r.Read(p)
	if err != nil {
		r.err = err
	}
	return n, err
}

func (r *rawReader) fault(at int64) error {
	var f *analytics.Fault
	if errors.As(r.err, &f) {
		return r.err
	}
	if errors.Is(r.err, syscall.EISDIR) {
		return &analytics.Fault{Offset: -1, Problem: "this is a directory", Remedy: "name the files in it"}
	}
	if errors.Is(r.err, context.Canceled) || errors.Is(r.err, context.DeadlineExceeded) {
		return r.err
	}
	kind := analytics.ErrUnavailable
	for _, k := range []error{analytics.ErrTooLarge, analytics.ErrInvalid, analytics.ErrConflict, analytics.ErrNotFound} {
		if errors.Is(r.err, k) {
			kind = k
		}
	}
	return &analytics.Fault{Offset: at, Problem: fmt.Sprintf("reading stopped (%v)", r.err), Remedy: "try again", Kind: kind}
}
