package wafermap

import (
	"math/rand/v2"
	"slices"
	"testing"
)

// square gives the coordinates of a square of side dies in canonical order.
func square(side int) (x, y []int16) {
	for j := range side {
		for i := range side {
			x, y = append(x, int16(i-side/2)), append(y, int16(j-side/2))
		}
	}
	return x, y
}

func TestCanonicalLeavesOrderedRowsAlone(t *testing.T) {
	t.Parallel()
	x, y := square(30)
	o := Canonical(x, y)
	if o.Rows != nil || o.Starts != nil || o.Dies() != 900 || o.Repeated() != 0 || o.First() != nil {
		t.Fatalf("ordered rows were permuted: %+v", o)
	}
	if empty := Canonical(nil, nil); empty.Dies() != 0 || empty.Rows != nil {
		t.Errorf("empty: %+v", empty)
	}
}

// Not parallel: AllocsPerRun counts what every goroutine allocates.
func TestCanonicalAllocatesNothingForOrderedRows(t *testing.T) {
	x, y := square(30)
	if allocs := testing.AllocsPerRun(5, func() { Canonical(x, y) }); allocs != 0 {
		t.Errorf("%g allocations for ordered rows", allocs)
	}
}

func TestCanonicalSortsAndGroupsRepeats(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(3, 4))
	for range 50 {
		n := 1 + rng.IntN(400)
		x, y := make([]int16, n), make([]int16, n)
		for i := range x {
			x[i], y[i] = int16(rng.IntN(40)-20), int16(rng.IntN(20)-10)
		}
		if rng.IntN(3) == 0 {
			x[0], y[n-1] = -32768, 32767
		}
		checkOrdering(t, x, y)
	}
}

func checkOrdering(t *testing.T, x, y []int16) {
	t.Helper()
	rows := map[[2]int16][]int32{}
	for i := range x {
		d := [2]int16{x[i], y[i]}
		rows[d] = append(rows[d], int32(i))
	}
	o := Canonical(x, y)
	first, last := o.First(), o.Last()
	grid := &Grid{X: Gather(x, last), Y: Gather(y, last)}
	if err := grid.Check(); err != nil {
		t.Fatal(err)
	}
	if o.Dies() != len(rows) || grid.Len() != len(rows) {
		t.Fatalf("%d dies, want %d", o.Dies(), len(rows))
	}
	repeated := 0
	for i := range grid.X {
		want := rows[[2]int16{grid.X[i], grid.Y[i]}]
		if len(want) > 1 {
			repeated++
		}
		if o.Rows == nil {
			continue
		}
		if got := o.Group(i); !slices.Equal(got, want) || first[i] != want[0] || last[i] != want[len(want)-1] {
			t.Fatalf("die %d: rows %v first %d last %d, want %v", i, got, first[i], last[i], want)
		}
	}
	if o.Repeated() != repeated {
		t.Fatalf("%d repeated, want %d", o.Repeated(), repeated)
	}
}

func BenchmarkCanonical(b *testing.B) {
	x, y := square(1000)
	reversedX, reversedY := slices.Clone(x), slices.Clone(y)
	slices.Reverse(reversedX)
	slices.Reverse(reversedY)
	for _, c := range []struct {
		name string
		x, y []int16
	}{{"ordered", x, y}, {"by column", y, x}, {"reversed", reversedX, reversedY}} {
		b.Run(c.name, func(b *testing.B) {
			b.ReportAllocs()
			b.SetBytes(int64(len(x)))
			for b.Loop() {
				Canonical(c.x, c.y)
			}
		})
	}
}
