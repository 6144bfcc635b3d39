package voronoi

import "math"

// linkUm is how near nodes of two blocks are to be one: they are computed twice, each
// seen from its own block, and a shorter piece in a third block may lie between.
const linkUm = 4 * joinUm

// join finds which nodes on the borders of the blocks listed are nodes of their
// neighbours, and the numbers of all nodes.
func (g *Graph) join(list []int) {
	for _, i := range list {
		g.links[i] = g.linksOf(i)
	}
	g.base = make([]int32, len(g.blocks)+1)
	for i, b := range g.blocks {
		g.base[i+1] = g.base[i] + int32(len(b.nodes))
	}
	g.lead = make([]int32, g.base[len(g.blocks)])
	for i := range g.lead {
		g.lead[i] = int32(i)
	}
	for i, ls := range g.links {
		for _, l := range ls {
			a, b := find(g.lead, g.base[i]+l.own), find(g.lead, g.base[l.block]+l.other)
			g.lead[max(a, b)] = min(a, b)
		}
	}
	for i := range g.lead {
		g.lead[i] = g.lead[g.lead[i]] // leaders are the lowest, so settled before
	}
}

func find(lead []int32, i int32) int32 {
	for lead[i] != i {
		lead[i] = lead[lead[i]]
		i = lead[i]
	}
	return i
}

// linksOf are block i's to the blocks on the right, above, and above to either side.
func (g *Graph) linksOf(i int) []link {
	var out []link
	x, y := i%g.nx, i/g.nx
	own := g.blocks[i]
	for _, d := range [4][2]int{{1, 0}, {-1, 1}, {0, 1}, {1, 1}} {
		nx, ny := x+d[0], y+d[1]
		if nx < 0 || nx >= g.nx || ny >= g.ny {
			continue
		}
		n := ny*g.nx + nx
		other := g.blocks[n]
		off := vec{float64(d[0]) * g.side, float64(d[1]) * g.side}
		from := 0
		for _, a := range own.border {
			p := own.nodes[a].at.sub(off)
			for from < len(other.border) && other.nodes[other.border[from]].at.x < p.x-linkUm {
				from++
			}
			for _, b := range other.border[from:] {
				q := other.nodes[b].at
				if q.x > p.x+linkUm {
					break
				}
				if math.Abs(q.y-p.y) <= linkUm {
					out = append(out, link{a, int32(n), b})
				}
			}
		}
	}
	return out
}
