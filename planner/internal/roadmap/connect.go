package roadmap

// Connected says, without a search, what the free cells' connected regions tell: Found when
// some cell of From and some cell of To are in one region; else which end has fewer
// cells about it. One-way zones are left out of account, so that Found does not
// promise a way where there are any; that there is none is certain.
func Connected(q *Query) Outcome {
	from, to := map[int]int64{}, map[int]int64{}
	for _, l := range q.From {
		if r, n, ok := q.Free.Region(l.Cell.Col, l.Cell.Row); ok {
			from[r] = n
		}
	}
	for _, l := range q.To {
		if r, n, ok := q.Free.Region(l.Cell.Col, l.Cell.Row); ok {
			if _, both := from[r]; both {
				return Found
			}
			to[r] = n
		}
	}
	sum := func(m map[int]int64) (n int64) {
		for _, v := range m {
			n += v
		}
		return n
	}
	if sum(from) <= sum(to) {
		return FromShut
	}
	return ToShut
}
