package mask

import (
	"slices"
	"sync"
	"sync/atomic"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/planner/clearance"
	"example.com/wideberth/planner/internal/rules"
)

// Limit is how many masks a Set keeps: five for each of a dozen kinds of body.
// One more than that drops the one used longest ago, which costs time when it is
// asked for again and changes no answer.
const Limit = 60

// Set is the masks of one version, one for each Key asked for.
type Set struct {
	field *clearance.Field
	rules *rules.Rules
	clock atomic.Int64
	mu    sync.Mutex // held to add a mask; readers take the list without it
	list  atomic.Pointer[[]*Mask]
}

// NewSet makes an empty set.
func NewSet(f *clearance.Field, r *rules.Rules) *Set {
	s := &Set{field: f, rules: r}
	s.list.Store(&[]*Mask{})
	return s
}

// Mask is the mask for k.
func (s *Set) Mask(k Key) *Mask {
	if !k.Zones {
		k.RadiusUm = 0
	}
	find := func() *Mask {
		for _, m := range *s.list.Load() {
			if m.key == k {
				if m.used.Load() != s.clock.Load() { // else nothing is written that others read
					m.used.Store(s.clock.Add(1))
				}
				return m
			}
		}
		return nil
	}
	if m := find(); m != nil {
		return m
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	if m := find(); m != nil {
		return m
	}
	m := newMask(k, s.field, s.rules)
	m.used.Store(s.clock.Add(1))
	s.add(m)
	return m
}

func (s *Set) add(m *Mask) {
	list := slices.Clone(*s.list.Load())
	if len(list) >= Limit {
		oldest := 0
		for i := range list {
			if list[i].used.Load() < list[oldest].used.Load() {
				oldest = i
			}
		}
		list = slices.Delete(list, oldest, oldest+1)
	}
	list = append(list, m)
	s.list.Store(&list)
}

// Carry makes the set of another version of the same floor. Blocks whose field
// is the same, and near which no closed zone changed, are taken over.
// changed are the bounds of the closed zones that differ, before and after.
func (s *Set) Carry(f *clearance.Field, r *rules.Rules, changed []geom.Rect) *Set {
	t := NewSet(f, r)
	old := *s.list.Load()
	if len(old) == 0 {
		return t
	}
	same := sameBlocks(s.field, f)
	for _, m := range old {
		t.add(m.carry(f, r, same, changed))
	}
	t.clock.Store(s.clock.Load())
	return t
}

func (m *Mask) carry(f *clearance.Field, r *rules.Rules, same []bool, changed []geom.Rect) *Mask {
	k := m.key
	n := newMask(k, f, r)
	n.used.Store(m.used.Load())
	side := float64(m.set.ResolutionUm) * floor.BlockSize
	reach := float64(k.RadiusUm)
	for i := range m.blocks {
		b := m.blocks[i].Load()
		if b == nil || !same[i] {
			continue
		}
		if k.Zones {
			lo := geom.Point{
				X: float64(m.set.OriginX) + float64(float64(i%m.nx)*side),
				Y: float64(m.set.OriginY) + float64(float64(i/m.nx)*side),
			}
			box := geom.Rect{Min: lo, Max: geom.Point{X: lo.X + side, Y: lo.Y + side}}.Grow(reach)
			if slices.ContainsFunc(changed, box.Intersects) {
				continue
			}
		}
		n.blocks[i].Store(b)
		n.parts[i].Store(m.parts[i].Load())
	}
	return n
}

func sameBlocks(a, b *clearance.Field) []bool {
	s := b.Map().Settings()
	nx := (s.Columns + floor.BlockSize - 1) / floor.BlockSize
	ny := (s.Rows + floor.BlockSize - 1) / floor.BlockSize
	same := make([]bool, nx*ny)
	for i := range same {
		same[i] = b.SameBlock(a, i%nx, i/nx)
	}
	return same
}
