package wafermap

import (
	"fmt"
	"math"
)

// Encoding is how a plane's values are held and stored.
type Encoding uint8

const (
	Int16   Encoding = 1 // value = base + k·resolution, k int16
	Int32   Encoding = 2 // value = base + k·resolution, k int32
	Float32 Encoding = 3 // the value itself, IEEE 754 binary32 (data that is float)
	Float64 Encoding = 4 // the value itself, IEEE 754 binary64 (decimals too long for int32)
)

// Missing16 and Missing32 mean "no value" in scaled planes; NaN does in float planes.
const (
	Missing16 = math.MinInt16
	Missing32 = math.MinInt32
)

// Plane is one quantity over all dies of a grid, in the grid's order.
//
// For Int16 and Int32 the value of die i is (BaseK + k[i]) · 10^Exponent, which
// Value computes as one correctly rounded division or multiplication, so that a
// value written 452.37 in a file comes back as the float64 nearest to 452.37.
// Exactly one of the slices is non-nil, the one Encoding names.
type Plane struct {
	Quantity string
	Encoding Encoding
	Exponent int   // power of ten of the resolution: -2 for 0.01
	BaseK    int64 // base in units of the resolution
	K16      []int16
	K32      []int32
	F32      []float32
	F64      []float64
}

// Len is the number of dies.
func (p *Plane) Len() int {
	switch p.Encoding {
	case Int16:
		return len(p.K16)
	case Int32:
		return len(p.K32)
	case Float32:
		return len(p.F32)
	default:
		return len(p.F64)
	}
}

// Resolution is 10^Exponent for scaled planes and 0 for float planes.
func (p *Plane) Resolution() float64 {
	if p.Encoding == Float32 || p.Encoding == Float64 {
		return 0
	}
	return Pow10(p.Exponent)
}

// Value is the value of die i, NaN when it has none.
func (p *Plane) Value(i int) float64 {
	switch p.Encoding {
	case Int16:
		if k := p.K16[i]; k != Missing16 {
			return Scaled(p.BaseK+int64(k), p.Exponent)
		}
		return math.NaN()
	case Int32:
		if k := p.K32[i]; k != Missing32 {
			return Scaled(p.BaseK+int64(k), p.Exponent)
		}
		return math.NaN()
	case Float32:
		return float64(p.F32[i])
	default:
		return p.F64[i]
	}
}

// Floats appends every value to dst (NaN for "no value") and returns it.
func (p *Plane) Floats(dst []float64) []float64 {
	if p.Encoding == Int16 && p.Exponent < 0 { // nearly all of them
		base, divisor := float64(p.BaseK), Pow10(-p.Exponent)
		for _, k := range p.K16 {
			v := (base + float64(k)) / divisor // as Scaled: both sums are exact
			if k == Missing16 {
				v = math.NaN()
			}
			dst = append(dst, v)
		}
		return dst
	}
	for i, n := 0, p.Len(); i < n; i++ {
		dst = append(dst, p.Value(i))
	}
	return dst
}

// Validate says whether the plane is well formed.
func (p *Plane) Validate() error {
	set := 0
	for _, ok := range []bool{p.K16 != nil, p.K32 != nil, p.F32 != nil, p.F64 != nil} {
		if ok {
			set++
		}
	}
	if set != 1 || p.Len() == 0 {
		return fmt.Errorf("plane %s: %d value slices, %d dies under encoding %d", p.Quantity, set, p.Len(), p.Encoding)
	}
	return nil
}

// Scaled is k · 10^exponent, correctly rounded for |exponent| ≤ 22.
func Scaled(k int64, exponent int) float64 {
	if exponent < 0 {
		return float64(k) / Pow10(-exponent)
	}
	return float64(k) * Pow10(exponent)
}

// Pow10 is 10^n, exact for 0 ≤ n ≤ 22.
func Pow10(n int) float64 {
	if n >= 0 && n < len(pow10) {
		return pow10[n]
	}
	return math.Pow10(n)
}

var pow10 = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22}
