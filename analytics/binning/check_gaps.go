package binning

import "fmt"

// maxGaps bounds how many gaps of a region are named.
const maxGaps = 20

// gaps finds places that have cells on all four sides and belong to none,
// declared holes aside, on the region's raster.
func (r *Region) gaps(region int) (found []Finding) {
	covered := r.covered()
	enclosed := enclosedBy(covered)
	squareArea := 1 / (r.raster.perX * r.raster.perY)
	for i := range enclosed {
		if !enclosed[i] {
			continue
		}
		squares := flood(enclosed, i)
		p := r.middle(squares)
		if r.inHole(p) {
			continue
		}
		area := float64(len(squares)) * squareArea
		found = append(found, Finding{Kind: Gap, Area: area, region: region, Cells: r.beside(covered, squares),
			Says: fmt.Sprintf("between the cells of %s lies a gap of area %.3g about (%.4g, %.4g): dies there are in no cell", r.Name, area, p.x, p.y)})
		if len(found) == maxGaps {
			break
		}
	}
	return found
}

// covered tells per square whether some cell has its middle, guards included.
func (r *Region) covered() []bool {
	g := r.raster
	out := make([]bool, len(g.codes))
	for i, code := range g.codes {
		if out[i] = code != 0; code == mixedSquare { // in a guard band is covered
			out[i] = r.classify(g.middle(i), g.candidatesOf(i)) != outsideCells
		}
	}
	return out
}

func (g *raster) middle(square int) point {
	return point{g.low.x + (float64(square%rasterSide)+0.5)/g.perX, g.low.y + (float64(square/rasterSide)+0.5)/g.perY}
}

// enclosedBy marks the squares that are not covered and have covered ones to the
// left, right, below and above.
func enclosedBy(covered []bool) []bool {
	sides := make([]uint8, len(covered))
	sweep := func(start, step int, bit uint8) {
		met := false
		for n, i := 0, start; n < rasterSide; n, i = n+1, i+step {
			if met = met || covered[i]; met && !covered[i] {
				sides[i] |= bit
			}
		}
	}
	for k := range rasterSide {
		sweep(k*rasterSide, 1, 1)
		sweep(k*rasterSide+rasterSide-1, -1, 2)
		sweep(k, rasterSide, 4)
		sweep(k+(rasterSide-1)*rasterSide, -rasterSide, 8)
	}
	out := make([]bool, len(covered))
	for i, s := range sides {
		out[i] = s == 15
	}
	return out
}

// flood takes the connected squares around one out of the set.
func flood(set []bool, start int) (squares []int) {
	set[start] = false
	squares = []int{start}
	for next := 0; next < len(squares); next++ {
		i := squares[next]
		for _, step := range []struct {
			by int
			ok bool
		}{{-1, i%rasterSide > 0}, {1, i%rasterSide < rasterSide-1}, {-rasterSide, i >= rasterSide}, {rasterSide, i < len(set)-rasterSide}} {
			if j := i + step.by; step.ok && set[j] {
				set[j] = false
				squares = append(squares, j)
			}
		}
	}
	return squares
}

// middle is a square in the midst of the list.
func (r *Region) middle(squares []int) point { return r.raster.middle(squares[len(squares)/2]) }

func (r *Region) inHole(p point) bool {
	for i := range r.Cells {
		for j := range r.Cells[i].Shapes {
			for _, hole := range r.Cells[i].Shapes[j].rings[1:] {
				if contains([]ring{hole}, p) {
					return true
				}
			}
		}
	}
	return false
}

// beside names the cells to the left and right of a gap.
func (r *Region) beside(covered []bool, squares []int) (names []string) {
	i := squares[len(squares)/2]
	for _, step := range []int{-1, 1} {
		j := i
		for !covered[j] {
			j += step
		}
		if c := r.classify(r.raster.middle(j), r.order); c >= 0 {
			names = append(names, r.Cells[c].Name)
		}
	}
	return names
}
