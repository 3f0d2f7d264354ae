package uniformity

import "math"

// The words for a wafer's colour.
const (
	OnColour   = "on colour"
	Short      = "short"
	Long       = "long"
	Mixed      = "mixed"
	Unmeasured = "unmeasured"
)

// ColourState gives the word for a wafer's colour. window is the half width
// about the target within which a wafer is on colour, in the summary's unit.
//
//   - median below target − window: short; above target + window: long;
//   - else on colour when at least half of the values lie within ±window of the
//     target, and mixed when fewer do (two populations either side of it, or a
//     spread too wide for the window);
//   - unmeasured without a value; "" without a target or a window.
//
// The share within ±window is exact for windows of 1, 2 and 5, and read off the
// histogram, linear inside a cell, for others.
func ColourState(s Summary, window float64) string {
	if math.IsNaN(s.Target) || math.IsNaN(window) || window <= 0 {
		return ""
	}
	// Borders are closed; slack forgives the last bits of a decimal difference.
	slack := 1e-9 * max(1, math.Abs(s.Target))
	switch deviation := s.Median - s.Target; {
	case s.N == 0 || math.IsNaN(deviation):
		return Unmeasured
	case deviation < -window-slack:
		return Short
	case deviation > window+slack:
		return Long
	}
	if shareWithin(s, window) >= 0.5 {
		return OnColour
	}
	return Mixed
}

func shareWithin(s Summary, window float64) float64 {
	for _, exact := range [...]struct{ width, share float64 }{{1, s.Within1}, {2, s.Within2}, {5, s.Within5}} {
		if window == exact.width && !math.IsNaN(exact.share) {
			return exact.share
		}
	}
	h := s.Histogram
	low, high := s.Target-window, s.Target+window
	inside := 0.0
	for i, n := range h.Counts {
		from := h.Low + float64(i)*h.Width
		overlap := (min(high, from+h.Width) - max(low, from)) / h.Width
		inside += float64(n) * max(0, min(1, overlap))
	}
	// What lies outside the histogram is within when the window reaches beyond
	// every value on that side.
	if low <= s.Min {
		inside += float64(h.Below)
	}
	if high >= s.Max {
		inside += float64(h.Above)
	}
	return inside / float64(s.N)
}
