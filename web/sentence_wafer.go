package web

import (
	"math"

	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
)

// WaferFound is what the first sentence of a wafer rests on.
type WaferFound struct {
	Wafer    string
	Measured bool
	Quantity quantity.Quantity   // the one the sentence is about
	Summary  *uniformity.Summary // nil: no summary is stored
	Target   float64             // NaN: none is known
	// Yield under a specification; Spec "" = none applies.
	Spec, SpecHref    string // "harbour-blue v3"
	Good, Denominator int
	OverLayout        bool
	Loss              Loss
	QuantityHref      string // to the map of Quantity
	BinsHref          string // to the map of bins
	Basis             string
}

// Loss is the largest group of dies that cannot be sold.
type Loss struct {
	Name  string // reject reason or bin
	Class string // class word; "" = nothing is lost; "unmeasured" = layout dies that the measurement has not
	Dies  int
	Place string // "in the outer 12 mm"; "" = no place stands out
}

// WaferSentence tells where a wafer sits and how much of it sells, or which of
// the two cannot be told and why.
func WaferSentence(f WaferFound) Sentence {
	s := Sentence{Basis: f.Basis}
	s.say("Wafer ")
	s.stress(f.Wafer, "")
	if !f.Measured {
		s.say(" is ")
		s.stress("unmeasured", "")
		s.say(": where it sits and what of it sells cannot be told until a file with its dies is loaded.")
		return s
	}
	f.sayPosition(&s)
	s.say("; ")
	f.sayYield(&s)
	s.say(".")
	return s
}

func (f WaferFound) sayPosition(s *Sentence) {
	q := f.Quantity
	decimals := max(Decimals(q.Resolution)-1, 0)
	label := lowerFirst(q.Label)
	if q.Name == "" {
		s.say(": where it sits cannot be told, since its figures are still being made")
		return
	}
	if f.Summary == nil || f.Summary.N == 0 || math.IsNaN(f.Summary.Median) {
		s.say(": where it sits cannot be told, since no die has a value of " + label)
		return
	}
	off := f.Summary.Median - f.Target
	if code, n, ok := commonest(f.Summary.Histogram); ok && q.Scale == quantity.Category {
		s.say(" has ")
		s.stress(Percent(n, f.Summary.N), f.QuantityHref)
		s.say(" of its " + Count(f.Summary.N) + " dies in " + label + " " + Number(code, 0))
		return
	}
	if math.IsNaN(off) || q.Scale != quantity.Deviation {
		s.say(" has a median " + label + " of ")
		s.stress(With(f.Summary.Median, decimals, q.Unit), f.QuantityHref)
		if q.Scale == quantity.Deviation {
			s.say(" and no target to hold it against")
		}
		return
	}
	target := With(f.Target, decimals, q.Unit) + " target"
	amount := With(math.Abs(off), decimals, q.Unit)
	switch {
	case Number(off, decimals) == Number(0, decimals):
		s.say(" sits ")
		s.stress("on its "+target, f.QuantityHref)
		s.say(" in " + label)
	case off > 0:
		s.say(" sits ")
		s.stress(amount+" long", f.QuantityHref)
		s.say(" of its " + target)
	default:
		s.say(" sits ")
		s.stress(amount+" short", f.QuantityHref)
		s.say(" of its " + target)
	}
}

// commonest is the code that most dies of a category have; ok is false when the
// histogram's cells hold more than one code.
func commonest(h uniformity.Histogram) (code float64, n int, ok bool) {
	for i, count := range h.Counts {
		if count > n {
			// A cell of one code may begin at it or half a step before it.
			code, n = math.Ceil(h.Low+float64(i)*h.Width), count
		}
	}
	return code, n, h.Width == 1 && n > 0
}

func (f WaferFound) sayYield(s *Sentence) {
	switch {
	case f.Spec == "":
		s.say("how much of it sells cannot be told, since no specification applies to it")
		return
	case f.Denominator == 0:
		s.say("how much of it sells under ")
		s.Parts = append(s.Parts, Part{Text: f.Spec, Em: true, Href: f.SpecHref})
		s.say(" cannot be told, since there are no dies to count")
		return
	}
	s.stress(Percent(f.Good, f.Denominator), f.BinsHref)
	over := " measured dies sell under "
	if f.OverLayout {
		over = " dies sell under "
	}
	s.say(" of " + Count(f.Denominator) + over)
	s.Parts = append(s.Parts, Part{Text: f.Spec, Em: true, Href: f.SpecHref})
	if f.Loss.Class == "" || f.Loss.Dies == 0 {
		return
	}
	s.say(", ")
	s.stress(Percent(f.Loss.Dies, f.Denominator), f.BinsHref)
	switch f.Loss.Class {
	case "unmeasured":
		s.say(" were not measured")
	case "untested":
		s.say(" lack a value that it needs")
	case "unsellable":
		s.say(" fall in " + f.Loss.Name + ", which is not sold")
	default:
		s.say(" are rejected: " + f.Loss.Name)
	}
	if f.Loss.Place != "" {
		s.say(", mostly " + f.Loss.Place)
	}
}

func lowerFirst(s string) string {
	// Abbreviations (CIE x) keep their capitals.
	if len(s) > 1 && s[1] >= 'A' && s[1] <= 'Z' {
		return s
	}
	if s == "" {
		return s
	}
	return string(s[0]|0x20) + s[1:]
}
