package clearance

// blockShift and blockSize: everything is kept in blocks of 64x64, the floor's own
// block size, so that a row of a block is one machine word.
const (
	blockShift = 6
	blockSize  = 1 << blockShift
	blockMask  = blockSize - 1
)

// table is a persistent two-dimensional array: a fork shares its rows with the
// table it came from until it writes to them.
type table[T any] struct {
	nx, ny int
	rows   [][]T
	owned  []bool // rows this table may write to; nil once the table is frozen
}

func newTable[T any](nx, ny int) table[T] {
	t := table[T]{nx: nx, ny: ny, rows: make([][]T, ny), owned: make([]bool, ny)}
	for y := range t.rows {
		t.rows[y] = make([]T, nx)
		t.owned[y] = true
	}
	return t
}

func (t *table[T]) at(x, y int) T { return t.rows[y][x] }

// set writes one entry, copying its row first when it is shared.
func (t *table[T]) set(x, y int, v T) {
	if !t.owned[y] {
		t.rows[y] = append([]T(nil), t.rows[y]...)
		t.owned[y] = true
	}
	t.rows[y][x] = v
}

// fork gives a table that may be written to without touching t.
func (t *table[T]) fork() table[T] {
	return table[T]{nx: t.nx, ny: t.ny, rows: append([][]T(nil), t.rows...), owned: make([]bool, t.ny)}
}

// freeze ends writing.
func (t *table[T]) freeze() { t.owned = nil }
