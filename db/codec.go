package db

import (
	"encoding/binary"
	"fmt"
	"math"

	"epitally/analytics"
	"epitally/analytics/wafermap"
)

// StoredPlane is a plane as it lies in the database: see EncodePlane.
type StoredPlane struct {
	Encoding   wafermap.Encoding
	Base       float64
	Resolution float64
	N          int
	Data       []byte // values split by significance, low bytes first
}

// width is the bytes of one value, 0 for an encoding that is not known.
func width(e wafermap.Encoding) int {
	switch e {
	case wafermap.Int16:
		return 2
	case wafermap.Int32, wafermap.Float32:
		return 4
	case wafermap.Float64:
		return 8
	}
	return 0
}

// EncodePlane packs a plane as it is stored: the lowest bytes of all values,
// then all next bytes, and so on. Like bytes stand together, which is what lets
// LZ4 compress a wafer whose values differ little.
func EncodePlane(p *wafermap.Plane) (StoredPlane, error) {
	if err := p.Validate(); err != nil {
		return StoredPlane{}, err
	}
	n := p.Len()
	s := StoredPlane{Encoding: p.Encoding, N: n, Data: make([]byte, n*width(p.Encoding))}
	if p.Encoding == wafermap.Int16 || p.Encoding == wafermap.Int32 {
		s.Base, s.Resolution = wafermap.Scaled(p.BaseK, p.Exponent), wafermap.Scaled(1, p.Exponent)
	}
	switch p.Encoding {
	case wafermap.Int16:
		low, high := s.Data[:n], s.Data[n:2*n]
		for i, k := range p.K16 {
			low[i], high[i] = byte(k), byte(uint16(k)>>8)
		}
	case wafermap.Int32:
		for i, k := range p.K32 {
			split32(s.Data, n, i, uint32(k))
		}
	case wafermap.Float32:
		for i, v := range p.F32 {
			split32(s.Data, n, i, math.Float32bits(v))
		}
	case wafermap.Float64:
		for i, v := range p.F64 {
			bits := math.Float64bits(v)
			for b := range 8 {
				s.Data[b*n+i] = byte(bits >> (8 * b))
			}
		}
	}
	return s, nil
}

func split32(data []byte, n, i int, v uint32) {
	data[i], data[n+i], data[2*n+i], data[3*n+i] = byte(v), byte(v>>8), byte(v>>16), byte(v>>24)
}

func join32(data []byte, n, i int) uint32 {
	return uint32(data[i]) | uint32(data[n+i])<<8 | uint32(data[2*n+i])<<16 | uint32(data[3*n+i])<<24
}

// DecodePlane is the inverse of EncodePlane. Damaged data is analytics.ErrInvalid.
func DecodePlane(quantity string, s StoredPlane) (wafermap.Plane, error) {
	bad := func(format string, args ...any) (wafermap.Plane, error) {
		return wafermap.Plane{}, fmt.Errorf("stored plane of %s: %s: %w", quantity, fmt.Sprintf(format, args...), analytics.ErrInvalid)
	}
	w := width(s.Encoding)
	if w == 0 {
		return bad("encoding %d is not known", s.Encoding)
	}
	if s.N <= 0 || s.N > wafermap.MaxDies || len(s.Data) != s.N*w {
		return bad("%d bytes for %d dies of %d bytes", len(s.Data), s.N, w)
	}
	p := wafermap.Plane{Quantity: quantity, Encoding: s.Encoding}
	if s.Encoding == wafermap.Int16 || s.Encoding == wafermap.Int32 {
		exponent, baseK, ok := scale(s.Base, s.Resolution)
		if !ok {
			return bad("base %g and resolution %g are no decimal scale", s.Base, s.Resolution)
		}
		p.Exponent, p.BaseK = exponent, baseK
	}
	n := s.N
	switch s.Encoding {
	case wafermap.Int16:
		p.K16 = make([]int16, n)
		Merge16(p.K16, s.Data[:n], s.Data[n:2*n])
	case wafermap.Int32:
		p.K32 = make([]int32, n)
		for i := range p.K32 {
			p.K32[i] = int32(join32(s.Data, n, i))
		}
	case wafermap.Float32:
		p.F32 = make([]float32, n)
		for i := range p.F32 {
			p.F32[i] = math.Float32frombits(join32(s.Data, n, i))
		}
	case wafermap.Float64:
		p.F64 = make([]float64, n)
		for i := range p.F64 {
			var bits uint64
			for b := range 8 {
				bits |= uint64(s.Data[b*n+i]) << (8 * b)
			}
			p.F64[i] = math.Float64frombits(bits)
		}
	}
	return p, nil
}

// Merge16 puts low and high bytes together; the three have equal length. Eight
// values are spread with word operations, since this is where decoding spends
// its time.
func Merge16(dst []int16, low, high []byte) {
	i := 0
	for ; i+8 <= len(dst); i += 8 {
		l, h := binary.LittleEndian.Uint64(low[i:]), binary.LittleEndian.Uint64(high[i:])
		d := dst[i : i+8 : i+8]
		d[0] = int16(l&0xff | h<<8&0xff00)
		d[1] = int16(l>>8&0xff | h&0xff00)
		d[2] = int16(l>>16&0xff | h>>8&0xff00)
		d[3] = int16(l>>24&0xff | h>>16&0xff00)
		d[4] = int16(l>>32&0xff | h>>24&0xff00)
		d[5] = int16(l>>40&0xff | h>>32&0xff00)
		d[6] = int16(l>>48&0xff | h>>40&0xff00)
		d[7] = int16(l>>56 | h>>48&0xff00)
	}
	for ; i < len(dst); i++ {
		dst[i] = int16(uint16(low[i]) | uint16(high[i])<<8)
	}
}

// Scale gives the exponent and the base in units of the resolution of a stored
// scaled plane; ok is false when the resolution is no power of ten.
func (s *StoredPlane) Scale() (exponent int, baseK int64, ok bool) {
	return scale(s.Base, s.Resolution)
}

func scale(base, resolution float64) (exponent int, baseK int64, ok bool) {
	if !(resolution > 0) || math.IsInf(resolution, 0) {
		return 0, 0, false
	}
	exponent = int(math.Round(math.Log10(resolution)))
	if wafermap.Scaled(1, exponent) != resolution {
		return 0, 0, false
	}
	k := math.Round(base / resolution)
	if math.IsNaN(k) || math.Abs(k) > 1<<52 {
		return 0, 0, false
	}
	return exponent, int64(k), true
}
