package voronoi

import (
	"math"
	"slices"

	"example.com/wideberth/mapstore/geom"
)

// net is the roads that have one clearance, cut into connected pieces.
type net struct {
	piece   []int32   // of each node, by its lowest node
	portals [][]int32 // by part of Open: those from which another portal is reached along roads
	begin   []int32   // portals of piece n: list[begin[n]:begin[n+1]]
	list    []int32
}

func (n *net) siblings(piece int32) []int32 { return n.list[n.begin[piece]:n.begin[piece+1]] }

// The bounds of what nets are kept, the oldest going first. A net takes some 12 bytes a node.
// One net is kept whatever its size.
const (
	// maxNets bounds the clearances whose nets are kept: those required, as many as there
	// are kinds of bodies on a floor, and netLevels.
	maxNets = 64
	// maxNetNodes bounds their nodes, all nets of some Roads together: 100 MB.
	maxNetNodes = 8 << 20
	// netLevels is how many nets serve for all bottlenecks.
	netLevels = 32
)

// netLevel is the next clearance below um, or um itself, for which a net is kept.
func (w *Roads) netLevel(um float64) float64 { return math.Floor(um/w.p*netLevels) * w.p / netLevels }

// netOf is the net for clearance r, kept for the next time.
func (w *Roads) netOf(r float64) *net {
	w.nets.mu.Lock()
	defer w.nets.mu.Unlock()
	for _, k := range w.nets.list {
		if k.r == r {
			return k.net
		}
	}
	n := w.makeNet(r)
	if len(w.nets.list) == netsKept(len(w.nodes)) {
		w.nets.list = slices.Delete(w.nets.list, 0, 1)
	}
	w.nets.list = append(w.nets.list, keyed{r, n})
	return n
}

// netsKept is how many nets of so many nodes are kept.
func netsKept(nodes int) int { return min(maxNets, max(1, maxNetNodes/max(1, nodes))) }

type keyed struct {
	r float64
	*net
}

func (w *Roads) makeNet(r float64) *net {
	n := &net{piece: make([]int32, len(w.nodes)), begin: make([]int32, len(w.nodes)+1)}
	for i := range n.piece {
		n.piece[i] = int32(i)
	}
	for i := range w.roads {
		if v := &w.roads[i]; v.um0 >= r-tieUm {
			a, b := find(n.piece, v.a), find(n.piece, v.b)
			n.piece[max(a, b)] = min(a, b)
		}
	}
	for i := range n.piece {
		n.piece[i] = n.piece[n.piece[i]] // leaders are the lowest, so settled before
		if w.nodes[i].part >= 0 {
			n.begin[n.piece[i]+1]++
		}
	}
	for i := range n.piece {
		n.begin[i+1] += n.begin[i]
	}
	n.list = make([]int32, n.begin[len(n.piece)])
	next := slices.Clone(n.begin)
	for i, k := range n.piece {
		if w.nodes[i].part >= 0 {
			n.list[next[k]] = int32(i)
			next[k]++
		}
	}
	n.portals = make([][]int32, len(w.portals))
	for k, part := range w.portals {
		for _, v := range part {
			if len(n.siblings(n.piece[v])) > 1 {
				n.portals[k] = append(n.portals[k], v)
			}
		}
	}
	return n
}

// maxSiblings bounds the portals that leaving looks at.
const maxSiblings = 64

// leaving is a lower bound of the cost from portal v to the goal when the way goes on
// along roads: to the goal's way in, or to another portal and as the crow flies from there.
func (k *seeker) leaving(v int32) float64 {
	piece := k.net.piece[v]
	best := inf
	if piece == k.goalPiece {
		best = float64((1 + k.weight) * geom.Dist(k.nodes[v].at, k.to.to))
	}
	list := k.net.siblings(piece)
	if len(list) > maxSiblings {
		return k.estimate(v)
	}
	for _, u := range list {
		if u != v {
			at := k.nodes[u].at
			best = min(best, float64((1+k.weight)*geom.Dist(k.nodes[v].at, at))+geom.Dist(at, k.to.to))
		}
	}
	return best
}
