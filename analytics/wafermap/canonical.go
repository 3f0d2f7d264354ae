package wafermap

// Ordering says how the rows of a source, in file order, become the dies of a
// grid in canonical order.
type Ordering struct {
	// Rows lists the rows by (y, x); rows of the same die follow one another in
	// file order. Nil means that the rows are canonical as they stand.
	Rows []int32
	// Starts holds, per die of the grid, the index in Rows of its first row. Nil
	// means that no die repeats: die i is row Rows[i].
	Starts []int32
	rows   int
}

// Canonical finds the ordering of rows with the given coordinates, which must be
// equally many. Rows that stand in canonical order already, as nearly every
// source has them, cost one comparison each and no allocation.
func Canonical(x, y []int16) Ordering {
	o := Ordering{rows: len(x)}
	if isCanonical(x, y) {
		return o
	}
	o.Rows = make([]int32, len(x))
	for i := range o.Rows {
		o.Rows[i] = int32(i)
	}
	// Two stable counting passes: by x, then by y.
	other := make([]int32, len(x))
	countingSort(other, o.Rows, x)
	countingSort(o.Rows, other, y)

	repeats := 0
	for i := 1; i < len(o.Rows); i++ {
		a, b := o.Rows[i-1], o.Rows[i]
		if x[a] == x[b] && y[a] == y[b] {
			repeats++
		}
	}
	if repeats == 0 {
		return o
	}
	o.Starts = other[:0]
	for i, row := range o.Rows {
		if i == 0 || x[o.Rows[i-1]] != x[row] || y[o.Rows[i-1]] != y[row] {
			o.Starts = append(o.Starts, int32(i))
		}
	}
	return o
}

func isCanonical(x, y []int16) bool {
	if len(x) == 0 {
		return true
	}
	y = y[:len(x)]
	last := int32(y[0])<<16 | int32(uint16(x[0])^0x8000)
	for i := 1; i < len(x); i++ {
		key := int32(y[i])<<16 | int32(uint16(x[i])^0x8000)
		if key <= last {
			return false
		}
		last = key
	}
	return true
}

// countingSort writes the rows of src to dst in ascending order of key[row],
// keeping the order of equal keys.
func countingSort(dst, src []int32, key []int16) {
	low, high := key[0], key[0]
	for _, k := range key {
		low, high = min(low, k), max(high, k)
	}
	next := make([]int32, int(high)-int(low)+2)
	for _, k := range key {
		next[int(k)-int(low)+1]++
	}
	for i := 1; i < len(next); i++ {
		next[i] += next[i-1]
	}
	for _, row := range src {
		k := int(key[row]) - int(low)
		dst[next[k]] = row
		next[k]++
	}
}

// Dies is the number of distinct dies.
func (o *Ordering) Dies() int {
	if o.Starts != nil {
		return len(o.Starts)
	}
	return o.rows
}

// Repeated is the number of dies that have more than one row.
func (o *Ordering) Repeated() int {
	n := 0
	for i := range o.Starts {
		if len(o.Group(i)) > 1 {
			n++
		}
	}
	return n
}

// Group lists the rows of one die in file order; nil when Rows is nil.
func (o *Ordering) Group(die int) []int32 {
	switch {
	case o.Rows == nil:
		return nil
	case o.Starts == nil:
		return o.Rows[die : die+1]
	case die+1 < len(o.Starts):
		return o.Rows[o.Starts[die]:o.Starts[die+1]]
	}
	return o.Rows[o.Starts[die]:]
}

// First gives, per die, its first row of the file; nil means that die i is row
// i. The slice may be Rows itself: read it only.
func (o *Ordering) First() []int32 {
	if o.Starts == nil {
		return o.Rows
	}
	rows := make([]int32, len(o.Starts))
	for i, start := range o.Starts {
		rows[i] = o.Rows[start]
	}
	return rows
}

// Last gives, per die, its last row of the file, as First gives the first.
func (o *Ordering) Last() []int32 {
	if o.Starts == nil {
		return o.Rows
	}
	rows := make([]int32, len(o.Starts))
	for i := range rows {
		group := o.Group(i)
		rows[i] = group[len(group)-1]
	}
	return rows
}

// Gather gives src[rows[0]], src[rows[1]], …: a column of a source in the order
// of First or Last. With nil rows it is src itself.
func Gather[T any](src []T, rows []int32) []T {
	if rows == nil {
		return src
	}
	dst := make([]T, len(rows))
	for i, row := range rows {
		dst[i] = src[row]
	}
	return dst
}
