package reader

import (
	"math"

	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

// column gathers one quantity of one wafer in file order: scaled integers at the
// finest decimal place seen so far, or floats once an int32 cannot hold one of
// them, so that nothing is lost.
type column struct {
	quantity quantity.Quantity
	convert  quantity.Conversion

	k    []int32   // nil once the column has turned to floats
	f    []float64 // nil until then
	exp  int       // power of ten of k
	frac int       // −exp once a value was seen and k is in use, else −1000: the fast path's test
	set  bool      // a value was seen
}

// noFrac is never the number of decimals of a field.
const noFrac = -1000

// Powers of ten beyond this are not exact in a float64 (wafermap.Scaled).
const maxExponent = 22

func newColumn(q quantity.Quantity) column {
	return column{quantity: q, convert: quantity.Conversion{Multiple: 1}, frac: noFrac}
}

// resize gives the column room for rows rows, keeping the first n.
func (c *column) resize(n, rows int) {
	if c.f != nil {
		f := make([]float64, rows)
		copy(f, c.f[:n])
		c.f = f
		return
	}
	k := make([]int32, rows)
	copy(k, c.k[:n])
	c.k = k
}

// reset begins the next wafer with room for rows rows.
func (c *column) reset(rows int) {
	c.f, c.exp, c.frac, c.set = nil, 0, noFrac, false
	if len(c.k) < rows {
		c.k = make([]int32, rows)
	}
	c.k = c.k[:rows]
}

func (c *column) missing(row int) {
	if c.f != nil {
		c.f[row] = math.NaN()
	} else {
		c.k[row] = wafermap.Missing32
	}
}

// put stores a value that the fast path could not: another number of decimals
// than before, many digits, or a column of floats. It reports false when the
// value is beyond float64.
func (c *column) put(row int, d decimal, text []byte, point byte) bool {
	if c.f == nil && c.scaled(row, d) {
		return true
	}
	if c.f == nil {
		c.toFloats(row)
	}
	v := c.float(d, text, point)
	c.f[row] = v
	return !math.IsInf(v, 0)
}

// scaled tries to hold the value as an integer at the finest decimal place.
func (c *column) scaled(row int, d decimal) bool {
	if d.long || d.exp < -maxExponent || d.exp > maxExponent {
		return false
	}
	m, ok := d.m, true
	switch {
	case !c.set:
		ok = m <= math.MaxInt32
	case d.exp > c.exp:
		m, ok = mulPow10(m, d.exp-c.exp)
	case d.exp < c.exp:
		ok = m <= math.MaxInt32 && c.rescale(row, d.exp)
	default:
		ok = m <= math.MaxInt32
	}
	if !ok {
		return false
	}
	if !c.set || d.exp < c.exp {
		c.exp, c.frac, c.set = d.exp, -d.exp, true
	}
	c.k[row] = int32(m)
	if d.neg {
		c.k[row] = -int32(m)
	}
	return true
}

// rescale brings the first n values to a finer power of ten, or changes nothing
// and reports false when one of them would no longer fit.
func (c *column) rescale(n, exp int) bool {
	largest := uint64(0)
	for _, k := range c.k[:n] {
		if k != wafermap.Missing32 {
			largest = max(largest, uint64(max(k, -k)))
		}
	}
	if _, ok := mulPow10(largest, c.exp-exp); !ok {
		return false
	}
	if largest == 0 {
		return true
	}
	factor := int32(1)
	for range c.exp - exp {
		factor *= 10
	}
	for i, k := range c.k[:n] {
		if k != wafermap.Missing32 {
			c.k[i] = k * factor
		}
	}
	return true
}

func (c *column) toFloats(n int) {
	f := make([]float64, len(c.k))
	for i, k := range c.k[:n] {
		f[i] = math.NaN()
		if k != wafermap.Missing32 {
			f[i] = wafermap.Scaled(int64(k), c.exp)
		}
	}
	c.f, c.frac = f, noFrac
}

// float is the float64 nearest to the decimal.
func (c *column) float(d decimal, text []byte, point byte) float64 {
	if d.long || d.m > 1<<53 || d.exp < -maxExponent || d.exp > maxExponent {
		return parseFloat(text, point)
	}
	v := wafermap.Scaled(int64(d.m), d.exp)
	if d.neg {
		v = -v
	}
	return v
}

// plane packs the values of rows (nil = the first n as they stand), converted
// to the quantity's unit. A decimal conversion only moves the exponent.
func (c *column) plane(n int, rows []int32) wafermap.Plane {
	name := c.quantity.Name
	if c.f != nil {
		f := wafermap.Gather(c.f[:n:n], rows)
		if c.convert.Power != 0 || c.convert.Multiple != 1 {
			for i := range f {
				f[i] = convertFloat(f[i], c.convert)
			}
		}
		c.f = nil
		return wafermap.PackFloat64(name, f)
	}
	k := wafermap.Gather(c.k[:n:n], rows)
	exp := c.exp + c.convert.Power
	if c.convert.Multiple == 1 && exp >= -maxExponent && exp <= maxExponent {
		p := wafermap.PackScaled(name, exp, k)
		if p.K32 != nil && rows == nil {
			c.k = nil // the plane took it over
		}
		return p
	}
	f := make([]float64, n)
	if rows != nil {
		f = f[:len(rows)]
	}
	for i, v := range k {
		f[i] = math.NaN()
		if v != wafermap.Missing32 {
			f[i] = convertFloat(wafermap.Scaled(int64(v), c.exp), c.convert)
		}
	}
	return wafermap.PackFloat64(name, f)
}

func convertFloat(v float64, by quantity.Conversion) float64 {
	if by.Power < 0 {
		return v * by.Multiple / wafermap.Pow10(-by.Power)
	}
	return v * by.Multiple * wafermap.Pow10(by.Power)
}
