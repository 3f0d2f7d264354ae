package wafermap

import "math"

// baseStep is the grain of a plane's base: bases are multiples of it where the
// range allows, so that the wafers of one product share a base (450.00 nm at a
// resolution of 0.01) and tables made for that base serve them all.
const baseStep = 10_000

// MissingWide means "no value" in the input of PackWide.
const MissingWide = math.MinInt64

// PackScaled makes the narrowest plane of scaled integers: the value of die i is
// k[i]·10^exponent, Missing32 being "no value". The plane is Int16 when the
// largest k exceeds the smallest by at most 65,534, else Int32 with base 0,
// which then takes k over. A plane without any value is Int16.
func PackScaled(quantity string, exponent int, k []int32) Plane {
	low, high := int64(math.MaxInt64), int64(math.MinInt64)
	for _, v := range k {
		if v != Missing32 {
			low, high = min(low, int64(v)), max(high, int64(v))
		}
	}
	base, ok := baseFor(low, high)
	if !ok {
		return Plane{Quantity: quantity, Encoding: Int32, Exponent: exponent, K32: k}
	}
	p := Plane{Quantity: quantity, Encoding: Int16, Exponent: exponent, BaseK: base, K16: make([]int16, len(k))}
	for i, v := range k {
		if v == Missing32 {
			p.K16[i] = Missing16
		} else {
			p.K16[i] = int16(int64(v) - base)
		}
	}
	return p
}

// PackWide is PackScaled for integers beyond 32 bits, MissingWide being "no
// value": Int16 or Int32 about a base where the range fits, else Float64. Each
// |k| must be at most 2^53, so that the value is the float64 nearest to the
// decimal; a reader that met more digits parses them as floats.
func PackWide(quantity string, exponent int, k []int64) Plane {
	low, high := int64(math.MaxInt64), int64(math.MinInt64)
	for _, v := range k {
		if v != MissingWide {
			low, high = min(low, v), max(high, v)
		}
	}
	base, ok := baseFor(low, high)
	wide := !ok && high-low > 0 && high-low <= 2*math.MaxInt32
	if !ok && !wide {
		f := make([]float64, len(k))
		for i, v := range k {
			f[i] = math.NaN()
			if v != MissingWide {
				f[i] = Scaled(v, exponent)
			}
		}
		return Plane{Quantity: quantity, Encoding: Float64, F64: f}
	}
	if wide {
		base = low + (high-low)/2
	}
	narrow := make([]int32, len(k))
	for i, v := range k {
		narrow[i] = Missing32
		if v != MissingWide {
			narrow[i] = int32(v - base)
		}
	}
	p := Plane{Quantity: quantity, Encoding: Int32, Exponent: exponent, BaseK: base, K32: narrow}
	if !wide {
		p = PackScaled(quantity, exponent, narrow)
		p.BaseK += base
	}
	return p
}

// baseFor chooses the base of an int16 plane whose integers run from low to
// high (low > high: no value at all): zero or another multiple of baseStep near
// mid-range, else mid-range itself. ok is false when int16 cannot hold the range.
func baseFor(low, high int64) (base int64, ok bool) {
	if low > high {
		return 0, true
	}
	span := high - low
	if span < 0 || span > 2*math.MaxInt16 {
		return 0, false
	}
	fits := func(base int64) bool { return low-base >= -math.MaxInt16 && high-base <= math.MaxInt16 }
	if fits(0) {
		return 0, true
	}
	middle := low + span/2
	step := (middle + baseStep/2) / baseStep
	if middle < 0 {
		step = (middle - baseStep/2) / baseStep
	}
	if base = step * baseStep; fits(base) {
		return base, true
	}
	return middle, true
}

// PackFloat32 makes a plane of values that are binary32 by nature, NaN being
// "no value". It takes v over.
func PackFloat32(quantity string, v []float32) Plane {
	return Plane{Quantity: quantity, Encoding: Float32, F32: v}
}

// PackFloat64 makes a float plane, NaN being "no value": Float32 when every
// value is a binary32 number, so that nothing is lost, else Float64, which
// takes v over.
func PackFloat64(quantity string, v []float64) Plane {
	for _, x := range v {
		if float64(float32(x)) != x && !math.IsNaN(x) {
			return Plane{Quantity: quantity, Encoding: Float64, F64: v}
		}
	}
	narrow := make([]float32, len(v))
	for i, x := range v {
		narrow[i] = float32(x)
	}
	return PackFloat32(quantity, narrow)
}
