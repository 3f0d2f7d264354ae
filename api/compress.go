package api

import (
	"io"
	"net/http"
	"strconv"
	"strings"
	"sync"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
	"github.com/labstack/echo/v4"
)

// tinyAnswer is the size in bytes below which an answer goes out as it is: it
// fits one packet either way.
const tinyAnswer = 1024

// compressor holds the encoders, which are costly to make.
//
// The levels are the fastest there are. On a million-die plane (2 MB of int16,
// bytes split by significance) either takes 1 to 2 ms on one core of 2026 and
// halves it: worth it on any network below 5 Gbit/s.
type compressor struct {
	zstd sync.Pool
	gzip sync.Pool
}

// encoder is what zstd and gzip encoders have in common.
type encoder interface {
	io.WriteCloser
	Reset(io.Writer)
}

func newCompressor() *compressor {
	return &compressor{
		zstd: sync.Pool{New: func() any {
			// One goroutine, and a window small enough that every client takes it.
			e, err := zstd.NewWriter(nil, zstd.WithEncoderLevel(zstd.SpeedFastest), zstd.WithEncoderConcurrency(1), zstd.WithWindowSize(1<<19))
			if err != nil {
				panic(err) // constant options
			}
			return e
		}},
		gzip: sync.Pool{New: func() any {
			e, err := gzip.NewWriterLevel(nil, gzip.BestSpeed)
			if err != nil {
				panic(err) // a constant level
			}
			return e
		}},
	}
}

func (p *compressor) pool(coding string) *sync.Pool {
	if coding == "zstd" {
		return &p.zstd
	}
	return &p.gzip
}

// middleware compresses answers by Accept-Encoding: zstd before gzip.
func (p *compressor) middleware(next echo.HandlerFunc) echo.HandlerFunc {
	return func(c echo.Context) error {
		w := &compressWriter{ResponseWriter: c.Response().Writer, compressor: p}
		if !isHead(c) {
			w.coding = chooseCoding(c.Request().Header.Values("Accept-Encoding"))
		}
		c.Response().Writer = w
		defer func() { c.Response().Writer = w.ResponseWriter }()
		if err := next(c); err != nil {
			return err
		}
		// Not deferred: an answer cut short by a panic must not look whole.
		return w.finish()
	}
}

// chooseCoding gives "zstd", "gzip" or "": what the reader takes, the better one
// when both weigh the same.
func chooseCoding(accept []string) string {
	weights := map[string]float64{}
	for _, item := range strings.Split(strings.Join(accept, ","), ",") {
		name, weight := weighted(item)
		weights[strings.ToLower(name)] = weight
	}
	weight := func(coding string) float64 {
		if q, ok := weights[coding]; ok {
			return q
		}
		return weights["*"]
	}
	switch z, g := weight("zstd"), weight("gzip"); {
	case z > 0 && z >= g:
		return "zstd"
	case g > 0:
		return "gzip"
	}
	return ""
}

// weighted splits "name;q=0.5" of an Accept header; the weight is 1 when none
// is given and 0 when it is not a number from 0 to 1.
func weighted(item string) (name string, weight float64) {
	name, params, _ := strings.Cut(strings.TrimSpace(item), ";")
	for _, param := range strings.Split(params, ";") {
		key, value, _ := strings.Cut(strings.TrimSpace(param), "=")
		if !strings.EqualFold(key, "q") {
			continue
		}
		q, err := strconv.ParseFloat(value, 64)
		if err != nil || !(q >= 0 && q <= 1) {
			return strings.TrimSpace(name), 0
		}
		return strings.TrimSpace(name), q
	}
	return strings.TrimSpace(name), 1
}

// compressible says whether a media type is worth compressing: pictures are
// compressed already.
func compressible(media string) bool {
	return media != "" && (!strings.HasPrefix(media, "image/") || strings.HasPrefix(media, "image/svg"))
}

// compressWriter holds back the first bytes of an answer until it is clear
// whether it is worth compressing.
type compressWriter struct {
	http.ResponseWriter
	compressor *compressor
	coding     string // what the reader takes; "" = nothing
	status     int    // 0 until the handler has said it
	held       []byte
	decided    bool
	encoder    encoder // nil: plain
}

// WriteHeader waits for the first bytes, unless there will be none.
func (w *compressWriter) WriteHeader(status int) {
	if w.status != 0 {
		return
	}
	w.status = status
	if status < http.StatusOK || status == http.StatusNoContent || status == http.StatusNotModified {
		w.decide(false)
	}
}

func (w *compressWriter) Write(b []byte) (int, error) {
	if w.status == 0 {
		w.WriteHeader(http.StatusOK)
	}
	if !w.decided {
		if len(w.held)+len(b) < tinyAnswer {
			w.held = append(w.held, b...)
			return len(b), nil
		}
		if err := w.decide(true); err != nil {
			return 0, err
		}
	}
	if w.encoder != nil {
		return w.encoder.Write(b)
	}
	return w.ResponseWriter.Write(b)
}

// decide sends the header and what was held back.
func (w *compressWriter) decide(large bool) error {
	w.decided = true
	h := w.Header()
	if compressible(h.Get("Content-Type")) && h.Get("Content-Encoding") == "" {
		h.Add("Vary", "Accept-Encoding")
		if large && w.coding != "" {
			w.encode(h)
		}
	}
	w.ResponseWriter.WriteHeader(w.status)
	if len(w.held) == 0 {
		return nil
	}
	var err error
	if w.encoder != nil {
		_, err = w.encoder.Write(w.held)
	} else {
		_, err = w.ResponseWriter.Write(w.held)
	}
	w.held = nil
	return err
}

func (w *compressWriter) encode(h http.Header) {
	h.Set("Content-Encoding", w.coding)
	h.Del("Content-Length")
	if tag := h.Get("ETag"); strings.HasPrefix(tag, `"`) {
		h.Set("ETag", "W/"+tag) // the same answer, but not byte for byte
	}
	w.encoder = w.compressor.pool(w.coding).Get().(encoder)
	w.encoder.Reset(w.ResponseWriter)
}

// finish ends the answer. An answer without a status is left to the server.
func (w *compressWriter) finish() error {
	if w.status == 0 {
		return nil
	}
	if !w.decided {
		if err := w.decide(false); err != nil {
			return err
		}
	}
	if w.encoder == nil {
		return nil
	}
	err := w.encoder.Close()
	w.encoder.Reset(nil)
	w.compressor.pool(w.coding).Put(w.encoder)
	w.encoder = nil
	return err
}
