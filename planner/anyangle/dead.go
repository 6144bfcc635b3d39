package anyangle

// findDead peels off cells with one way out, again and again: a way to a goal
// elsewhere never enters them.
func (b *block) findDead() {
	b.dead = make([]int32, len(b.cells))
	ways := make([]int32, len(b.cells))
	var peel []int32
	for i := range b.cells {
		b.dead[i] = none
		if ways[i] = b.of[i].count; ways[i] == 1 {
			peel = append(peel, int32(i))
		}
	}
	for len(peel) > 0 {
		i := peel[len(peel)-1]
		peel = peel[:len(peel)-1]
		if ways[i] != 1 {
			continue
		}
		for _, p := range b.portals[b.of[i].first : b.of[i].first+b.of[i].count] {
			if p.dir != inside {
				break // its one way out leads to another block
			}
			if b.dead[p.to] == i {
				continue // peeled before, it hangs on this one
			}
			b.dead[i] = p.to
			ways[i] = 0
			if ways[p.to]--; ways[p.to] == 1 {
				peel = append(peel, p.to)
			}
			break
		}
	}
}
