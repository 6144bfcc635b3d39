package picture

import (
	"fmt"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// change is what a version adds to an earlier one and takes from it.
type change struct {
	addedCells, removedCells int // that block now, that do not any more
	before                   *client.FloorContent
	came, went               []*wideberthv1.Feature // as they are, as they were
	added, removed, altered  []string               // names
}

func compare(before, after *client.FloorContent) change {
	c := change{before: before}
	was, is := blocks(before), blocks(after)
	for row := range int(after.Settings.GetRows()) {
		for col := range int(after.Settings.GetColumns()) {
			switch w, i := was(col, row), is(col, row); {
			case i && !w:
				c.addedCells++
			case w && !i:
				c.removedCells++
			}
		}
	}
	old := make(map[string]*wideberthv1.Feature, len(before.Features))
	for _, f := range before.Features {
		old[f.GetName()] = f
	}
	for _, f := range after.Features {
		b := old[f.GetName()]
		delete(old, f.GetName())
		switch {
		case b == nil:
			c.added = append(c.added, f.GetName())
			c.came = append(c.came, f)
		case !proto.Equal(b, f):
			c.altered = append(c.altered, f.GetName())
			c.came, c.went = append(c.came, f), append(c.went, b)
		}
	}
	for _, f := range before.Features { // in order, for the same bytes every time
		if old[f.GetName()] != nil {
			c.removed = append(c.removed, f.GetName())
			c.went = append(c.went, f)
		}
	}
	return c
}

// changes hatches what came and what went.
func (d *drawing) changes(f frame) {
	now, before := d.scene.Floor, d.scene.Before
	is, was := blocks(now), blocks(before)
	if d.change.removedCells > 0 {
		went := cellRects(before, f, func(c, r int) bool { return was(c, r) && !is(c, r) })
		d.out.path(boxesPath(f, went.rects), "removed-cells", `data-change="removed"`)
	}
	for _, ft := range d.change.went {
		d.out.path(outlinePath(f, ft), "removed", `data-change="removed"`)
	}
	if d.change.addedCells > 0 {
		came := cellRects(now, f, func(c, r int) bool { return is(c, r) && !was(c, r) })
		d.out.path(boxesPath(f, came.rects), "added-cells", `data-change="added"`)
	}
	for _, ft := range d.change.came {
		if p := ft.GetStation().GetPose(); p != nil {
			q := f.at(xy{p.GetXM(), p.GetYM()})
			d.out.circle(q.x, q.y, 11, "added-line", `data-change="added"`)
			continue
		}
		d.out.path(outlinePath(f, ft), "added", `data-change="added"`)
	}
}

// changeLines says in words what changed.
func (d *drawing) changeLines() []string {
	c := d.change
	cell := resolution(d.scene.Floor.Settings)
	var out []string
	if c.addedCells > 0 {
		out = append(out, fmt.Sprintf("%.1f m\u00b2 of raster became solid", float64(c.addedCells)*cell*cell))
	}
	if c.removedCells > 0 {
		out = append(out, fmt.Sprintf("%.1f m\u00b2 of raster became free", float64(c.removedCells)*cell*cell))
	}
	for _, l := range []struct {
		what  string
		names []string
	}{{"New: ", c.added}, {"Gone: ", c.removed}, {"Moved or altered: ", c.altered}} {
		if len(l.names) > 0 {
			out = append(out, l.what+few(l.names))
		}
	}
	if len(out) == 0 {
		out = append(out, "Nothing that is drawn differs")
	}
	return out
}

// few lists the first names.
func few(names []string) string {
	const shown = 4
	s := ""
	for i, n := range names {
		if i == shown {
			return s + fmt.Sprintf(" and %d more", len(names)-shown)
		}
		if i > 0 {
			s += ", "
		}
		s += n
	}
	return s
}
