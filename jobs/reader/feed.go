package reader

import (
	"context"
	"errors"
	"io"
)

// feed reads a source ahead of its parser, in a goroutine of its own: reading,
// decompression and hashing cost the parser nothing. close must be called.
type feed struct {
	ctx   context.Context
	full  chan []byte // filled blocks in order; closed after the last
	free  chan []byte // blocks to fill again
	stop  chan struct{}
	ended chan struct{}
	held  []byte // the block handed out
	err   error  // why the source ended; set before full is closed
}

func newFeed(ctx context.Context, src io.Reader) *feed {
	f := &feed{ctx: ctx, full: make(chan []byte, blockCount), free: make(chan []byte, blockCount),
		stop: make(chan struct{}), ended: make(chan struct{})}
	for range blockCount {
		f.free <- nil // allocated when first needed: most sources are small
	}
	go f.fill(src)
	return f
}

func (f *feed) fill(src io.Reader) {
	defer close(f.ended)
	defer close(f.full)
	for {
		var block []byte
		select {
		case block = <-f.free:
		case <-f.stop:
			return
		}
		if block == nil {
			block = make([]byte, blockBytes)
		}
		n := 0
		for n < blockBytes && f.err == nil {
			var k int
			k, f.err = src.Read(block[n:blockBytes])
			n += k
		}
		if n > 0 {
			f.full <- block[:n] // never waits: there are no more blocks than room
		}
		if f.err != nil {
			return
		}
	}
}

// next gives the next block, valid until the call after, or io.EOF at the end.
func (f *feed) next() ([]byte, error) {
	if f.held != nil {
		f.free <- f.held
		f.held = nil
	}
	if err := f.ctx.Err(); err != nil {
		return nil, err
	}
	select {
	case b, ok := <-f.full:
		if !ok {
			return nil, f.err
		}
		f.held = b[:blockBytes]
		return b, nil
	case <-f.ctx.Done():
		return nil, f.ctx.Err()
	}
}

// close ends the goroutine and waits for it; the source is free after.
func (f *feed) close() {
	close(f.stop)
	<-f.ended
}

// all gives the whole of a source of at most limit bytes, and whether that was
// all of it.
func (f *feed) all(limit int) (text []byte, whole bool, err error) {
	for {
		b, err := f.next()
		if errors.Is(err, io.EOF) {
			return text, true, nil
		}
		if err != nil {
			return nil, false, err
		}
		if text = append(text, b...); len(text) > limit {
			return nil, false, nil
		}
	}
}
