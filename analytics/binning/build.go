package binning

import (
	"fmt"
	"math/big"
	"slices"
	"strings"

	"epitally/analytics/yamldoc"
)

// build works a draft into codes and verdicts.
func (d *draft) build() (*Spec, error) {
	if d.pattern == "" {
		for _, dim := range d.dimensions() {
			d.pattern += "{" + dim.name + "}"
		}
		if d.pattern == "" {
			d.pattern = "good"
		}
	}
	for _, r := range d.regions {
		d.spec.regions = append(d.spec.regions, r.Region)
	}
	for _, a := range d.axes {
		d.spec.axes = append(d.spec.axes, a.Axis)
	}
	d.spec.Uncertainty = make(map[string]float64, len(d.uncertainties))
	for q, u := range d.uncertainties {
		d.spec.Uncertainty[q] = nearest(u)
	}
	if err := d.nameBins(); err != nil {
		return nil, err
	}
	codes, err := d.addReasons()
	if err != nil {
		return nil, err
	}
	return d.spec, d.compile(codes)
}

// dimension is one part of a bin's name: the cells of a region or of an axis.
type dimension struct {
	name   string
	cells  []string
	stride uint32 // what one cell further adds to a bin's code
	at     yamldoc.Node
}

// dimensions lists the regions, then the axes; the last varies fastest.
func (d *draft) dimensions() []dimension {
	var list []dimension
	for _, r := range d.regions {
		dim := dimension{name: r.Name, at: r.at}
		for _, c := range r.Cells {
			dim.cells = append(dim.cells, c.Name)
		}
		list = append(list, dim)
	}
	for _, a := range d.axes {
		list = append(list, dimension{name: a.Name, cells: a.Names, at: a.at})
	}
	for i, step := len(list)-1, 1; i >= 0; i-- {
		list[i].stride = uint32(step)
		step *= len(list[i].cells)
	}
	return list
}

// binsAt gives the place for faults about bin names.
func (d *draft) binsAt() yamldoc.Node {
	if d.patternN.Node != nil {
		return d.patternN
	}
	return d.root
}

// nameBins lists the bins, the last dimension varying fastest.
func (d *draft) nameBins() error {
	dims, total := d.dimensions(), 1
	for _, dim := range dims {
		if total *= len(dim.cells); total >= maxCodes {
			return tooLarge(dim.at, fmt.Sprintf("regions and axes make %d bins or more, over the limit of %d codes", total, maxCodes))
		}
	}
	parts, err := d.splitPattern(dims)
	if err != nil {
		return err
	}
	names := make(map[string]bool, total)
	sold, priced := make([]bool, len(d.sellable)), make([]bool, len(d.prices))
	for i := range total {
		name := binName(parts, dims, i)
		switch {
		case len(name) > 4*maxName:
			return d.binsAt().Fault("", "the bin name %q is over %d bytes", name, 4*maxName)
		case names[name]:
			return d.binsAt().Fault("name every axis in the pattern, and give its cells names that cannot run together", "two bins are named %q", name)
		case name == UntestedName:
			return d.binsAt().Fault("", "%q cannot name a bin", name)
		}
		names[name] = true
		class := Unsellable
		if d.all {
			class = Sellable
		}
		for j, p := range d.sellable {
			if matches(p.text, name) {
				class, sold[j] = Sellable, true
			}
		}
		cell := Cell{Name: name, Class: class}
		for j := len(d.prices) - 1; j >= 0; j-- {
			if p := d.prices[j]; matches(p.text, name) {
				cell.Price, priced[j] = p.price, true
			}
		}
		d.spec.cells = append(d.spec.cells, cell)
	}
	if err := d.idle(d.sellable, sold); err != nil {
		return err
	}
	return d.idle(d.prices, priced)
}

// idle finds the first pattern that no bin's name fits.
func (d *draft) idle(patterns []draftPattern, used []bool) error {
	for j, p := range patterns {
		if !used[j] {
			return p.at.Fault("* stands for any text; the first bin is "+d.spec.cells[0].Name, "the pattern %q matches no bin", p.text)
		}
	}
	return nil
}

// part of a bin name's pattern: literal text, then the cell of a dimension (-1 = none).
type part struct {
	literal string
	axis    int
}

func (d *draft) splitPattern(dims []dimension) ([]part, error) {
	var parts []part
	for rest := d.pattern; rest != ""; {
		literal, after, open := strings.Cut(rest, "{")
		if strings.Contains(literal, "}") {
			return nil, d.binsAt().Fault("", "a } without its { in the bin name %q", d.pattern)
		}
		if !open {
			return append(parts, part{literal, -1}), nil
		}
		name, behind, closed := strings.Cut(after, "}")
		if !closed {
			return nil, d.binsAt().Fault("", "a { without its } in the bin name %q", d.pattern)
		}
		axis := slices.IndexFunc(dims, func(dim dimension) bool { return dim.name == name })
		if axis < 0 {
			return nil, d.binsAt().Fault("", "the bin name %q refers to %q, which is no axis or region", d.pattern, name)
		}
		parts, rest = append(parts, part{literal, axis}), behind
	}
	return parts, nil
}

func binName(parts []part, dims []dimension, bin int) string {
	var b strings.Builder
	for _, p := range parts {
		b.WriteString(p.literal)
		if p.axis >= 0 {
			dim := dims[p.axis]
			b.WriteString(dim.cells[bin/int(dim.stride)%len(dim.cells)])
		}
	}
	return b.String()
}

// matches reports whether name fits pattern, in which * stands for any text and
// ? for one byte.
func matches(pattern, name string) bool {
	p, n, star, mark := 0, 0, -1, 0
	for n < len(name) {
		switch {
		case p < len(pattern) && pattern[p] == '*':
			star, mark = p, n
			p++
		case p < len(pattern) && (pattern[p] == '?' || pattern[p] == name[n]):
			p, n = p+1, n+1
		case star >= 0: // let the last * take one more
			mark++
			p, n = star+1, mark
		default:
			return false
		}
	}
	return strings.Trim(pattern[p:], "*") == ""
}

// addReasons gives every reject reason its code; the same reason in two places
// is one code. untested comes last.
func (d *draft) addReasons() (map[string]uint32, error) {
	bins := make(map[string]bool, len(d.spec.cells))
	for _, c := range d.spec.cells {
		bins[c.Name] = true
	}
	codes := map[string]uint32{}
	add := func(reason string, at yamldoc.Node) error {
		if bins[reason] {
			return at.Fault("", "%q names a bin and a reject reason", reason)
		}
		if _, known := codes[reason]; !known {
			codes[reason] = uint32(len(d.spec.cells))
			d.spec.cells = append(d.spec.cells, Cell{Name: reason, Class: Reject})
		}
		return nil
	}
	for _, r := range d.rules {
		if err := add(r.reason, r.when); err != nil {
			return nil, err
		}
	}
	for _, r := range d.regions {
		reasons := []string{r.Outside}
		if r.Guard > 0 {
			reasons = append(reasons, r.inner)
		}
		for _, reason := range reasons {
			if err := add(reason, r.at); err != nil {
				return nil, err
			}
		}
	}
	for _, a := range d.axes {
		reasons := []string{a.below, a.above}
		if a.guard.Sign() > 0 {
			reasons = append(reasons, a.inner)
		}
		for _, reason := range reasons {
			if err := add(reason, a.at); err != nil {
				return nil, err
			}
		}
	}
	if len(d.spec.cells) >= maxCodes {
		return nil, tooLarge(d.root, fmt.Sprintf("bins and reject reasons are %d codes, over the limit of %d", len(d.spec.cells), maxCodes-1))
	}
	codes[UntestedName] = uint32(len(d.spec.cells))
	d.spec.cells = append(d.spec.cells, Cell{Name: UntestedName, Class: Untested})
	return codes, nil
}

// rank orders rejects: 0 is the first to be tried.
func verdict(rank int, code uint32) uint32 { return uint32(0xffff-rank)<<16 | code }

// compile cuts every quantity's values into regions and gives each its verdict.
func (d *draft) compile(codes map[string]uint32) error {
	s := d.spec
	s.missing = verdict(0, codes[UntestedName])
	s.decided = make([]bool, len(s.cells))
	s.decided[codes[UntestedName]] = true
	for _, r := range d.rules {
		s.decided[codes[r.reason]] = true
	}
	d.collectCuts()
	for i := range s.plans {
		p := &s.plans[i]
		slices.SortFunc(p.cuts, cut.compare)
		p.cuts = slices.CompactFunc(p.cuts, func(a, b cut) bool { return a.compare(b) == 0 })
		p.verdicts = make([]uint32, len(p.cuts)+1)
	}
	dims := d.dimensions()
	for _, dim := range dims {
		s.dimensions = append(s.dimensions, Dimension{dim.name, dim.cells, int(dim.stride)})
	}
	rank := 1 + len(d.rules)
	for i := range d.regions {
		d.compileRegion(&d.regions[i], dims[i].stride, rank, codes)
		rank += 2
	}
	for a := range d.axes {
		p := d.plan(d.axes[a].Quantity)
		stride := dims[len(d.regions)+a].stride
		s.axisColumns = append(s.axisColumns, slices.IndexFunc(s.plans, func(q plan) bool { return q.quantity == p.quantity }))
		s.axisStrides = append(s.axisStrides, stride)
		for region, v := range d.axes[a].verdicts(p, rank+3*a, stride, codes) {
			p.verdicts[region] = join(p.verdicts[region], v)
		}
	}
	for r, rule := range d.rules {
		for _, t := range rule.terms {
			if err := d.compileTerm(rule, t, verdict(1+r, codes[rule.reason])); err != nil {
				return err
			}
		}
	}
	return nil
}

// join puts two verdicts on one quantity together: rejects outrank cells, cells add.
func join(a, b uint32) uint32 {
	if a < 1<<16 && b < 1<<16 {
		return a + b
	}
	return max(a, b)
}

func (d *draft) plan(quantity string) *plan {
	i := slices.IndexFunc(d.spec.plans, func(p plan) bool { return p.quantity == quantity })
	if i < 0 {
		i = len(d.spec.plans)
		d.spec.plans = append(d.spec.plans, plan{quantity: quantity})
	}
	return &d.spec.plans[i]
}

// compileRegion gives the region's outcomes their verdicts; its rejects rank from
// first on.
func (d *draft) compileRegion(r *draftRegion, stride uint32, first int, codes map[string]uint32) {
	rp := regionPlan{Region: r.Region, step: stride}
	for i, q := range r.Quantities {
		rp.columns[i] = slices.IndexFunc(d.spec.plans, func(p plan) bool { return p.quantity == q })
	}
	rp.verdicts = []uint32{verdict(first+1, codes[r.inner]), verdict(first, codes[r.Outside])}
	for i := range r.Cells {
		rp.verdicts = append(rp.verdicts, uint32(i)*stride)
	}
	d.spec.regionPlans = append(d.spec.regionPlans, rp)
}

func (d *draft) collectCuts() {
	for _, r := range d.regions {
		d.plan(r.Quantities[0])
		d.plan(r.Quantities[1])
	}
	for _, a := range d.axes {
		p := d.plan(a.Quantity)
		p.cuts = append(p.cuts, cut{a.edges[0], false}, cut{a.edges[len(a.edges)-1], true})
		for i := range a.Names {
			low, high := a.cell(i)
			p.cuts = append(p.cuts, low, high)
		}
	}
	for _, r := range d.rules {
		for _, t := range r.terms {
			for _, at := range t {
				p := d.plan(at.quantity)
				p.cuts = append(p.cuts, at.cut)
			}
		}
	}
}

// cell gives the cuts between which values are in cell i: half-open, the last
// cell closed, shrunk by the guard.
func (a *draftAxis) cell(i int) (low, high cut) {
	low.at = new(big.Rat).Add(a.edges[i], a.guard)
	high.at = new(big.Rat).Sub(a.edges[i+1], a.guard)
	high.after = i == len(a.Names)-1
	return low, high
}

// verdicts gives what the axis says of every region of its quantity. Its rejects
// rank from first on.
func (a *draftAxis) verdicts(p *plan, first int, stride uint32, codes map[string]uint32) []uint32 {
	out := make([]uint32, len(p.verdicts))
	fill := func(from, to int, v uint32) {
		for region := from; region < to; region++ {
			out[region] = v
		}
	}
	bottom, top := p.behind(cut{a.edges[0], false}), p.behind(cut{a.edges[len(a.edges)-1], true})
	fill(0, bottom, verdict(first, codes[a.below]))
	fill(bottom, top, verdict(first+2, codes[a.inner])) // where no cell overwrites it
	fill(top, len(out), verdict(first+1, codes[a.above]))
	for i := range a.Names {
		low, high := a.cell(i)
		fill(p.behind(low), p.behind(high), uint32(i)*stride)
	}
	return out
}

// behind is the first region whose values lie beyond one of the plan's cuts.
func (p *plan) behind(c cut) int {
	i, _ := slices.BinarySearchFunc(p.cuts, c, cut.compare)
	return i + 1
}

// span gives the regions from..to−1 in which every atom about the plan's quantity
// holds: all of them when there is none.
func (p *plan) span(t term) (from, to int) {
	to = len(p.verdicts)
	for _, a := range t {
		switch {
		case a.quantity != p.quantity:
		case a.beyond:
			from = max(from, p.behind(a.cut))
		default:
			to = min(to, p.behind(a.cut))
		}
	}
	return from, to
}

// compileTerm folds a conjunction on one quantity into that quantity's verdicts,
// and gives one that spans quantities a bit of every quantity's masks.
func (d *draft) compileTerm(r draftRule, t term, v uint32) error {
	s := d.spec
	single := !slices.ContainsFunc(t, func(a atom) bool { return a.quantity != t[0].quantity })
	if single {
		p := d.plan(t[0].quantity)
		from, to := p.span(t)
		for region := from; region < to; region++ {
			p.verdicts[region] = max(p.verdicts[region], v)
		}
		return nil
	}
	bit := len(s.terms)
	if bit == 64 {
		return r.when.Fault("", "the rules join quantities by \"and\" in more than 64 alternatives")
	}
	s.terms = append(s.terms, v)
	for i := range s.plans {
		p := &s.plans[i]
		if p.masks == nil {
			p.masks = make([]uint64, len(p.verdicts))
		}
		from, to := p.span(t)
		for region := from; region < to; region++ {
			p.masks[region] |= 1 << bit
		}
	}
	return nil
}
