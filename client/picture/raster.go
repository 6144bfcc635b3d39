package picture

import (
	"math"
	"strings"

	"example.com/wideberth/client"
	"example.com/wideberth/mapstore/floor"
)

const (
	// maxRasterRects is how many rectangles a raster may take before it is drawn
	// coarser: about a megabyte of SVG.
	maxRasterRects = 40_000
	// leastCellUnits is the smallest side of a drawn cell; finer ones are no use
	// to an eye.
	leastCellUnits = 0.4
)

// raster is cells as rectangles in metres.
type raster struct {
	rects []box
	cellM float64 // side of what was drawn as one cell
}

// cellRects gathers the cells for which is holds into rectangles, as few as
// equal runs in rows above one another give. Where that is too many or too fine
// for the frame, a coarser cell stands for all within it if any of them is.
func cellRects(c *client.FloorContent, f frame, is func(col, row int) bool) raster {
	res := resolution(c.Settings)
	step := 1
	for float64(step)*res*f.k < leastCellUnits && step < 1<<16 {
		step *= 2
	}
	for ; ; step *= 2 {
		if rects, ok := mergedRuns(c, f.area, step, is); ok {
			return raster{rects, float64(step) * res}
		}
	}
}

func mergedRuns(c *client.FloorContent, area box, step int, is func(col, row int) bool) ([]box, bool) {
	s := c.Settings
	res, ox, oy := resolution(s), s.GetOrigin().GetXM(), s.GetOrigin().GetYM()
	cols, rows := int(s.GetColumns()), int(s.GetRows())
	from := func(m, o float64) int { return max(0, int(math.Floor((m-o)/res))/step) }
	to := func(m, o float64, n int) int { return (min(n, int(math.Ceil((m-o)/res))) + step - 1) / step }
	c0, c1, r0, r1 := from(area.minX, ox), to(area.maxX, ox, cols), from(area.minY, oy), to(area.maxY, oy, rows)

	any := func(col, row int) bool {
		for y := row * step; y < min(rows, (row+1)*step); y++ {
			for x := col * step; x < min(cols, (col+1)*step); x++ {
				if is(x, y) {
					return true
				}
			}
		}
		return false
	}
	type run struct{ x0, x1, y0 int }
	var open []run
	var out []box
	emit := func(r run, y1 int) {
		side := float64(step) * res
		out = append(out, box{
			ox + float64(r.x0)*side, oy + float64(r.y0)*side,
			ox + min(float64(r.x1)*side, float64(cols)*res), oy + min(float64(y1)*side, float64(rows)*res),
		})
	}
	for row := r0; row <= r1; row++ {
		var now []run
		for col := c0; row < r1 && col < c1; col++ {
			if !any(col, row) {
				continue
			}
			x0 := col
			for col < c1 && any(col, row) {
				col++
			}
			now = append(now, run{x0, col, row})
		}
		// Both lists are in order of x0: a run that goes on as it was keeps its start.
		i := 0
		for j := range now {
			for i < len(open) && open[i].x0 < now[j].x0 {
				emit(open[i], row)
				i++
			}
			if i < len(open) && open[i].x0 == now[j].x0 {
				if open[i].x1 == now[j].x1 {
					now[j].y0 = open[i].y0
				} else {
					emit(open[i], row)
				}
				i++
			}
		}
		for ; i < len(open); i++ {
			emit(open[i], row)
		}
		if len(out) > maxRasterRects && step < 1<<16 {
			return nil, false
		}
		open = now
	}
	return out, true
}

// boxesPath is rectangles as one path.
func boxesPath(f frame, rects []box) string {
	var b strings.Builder
	for _, r := range rects {
		r = r.clip(f.area.grow(1 / f.k))
		p := f.at(xy{r.minX, r.maxY})
		w := num(r.width() * f.k)
		b.WriteString("M" + num(p.x) + " " + num(p.y) + "h" + w + "v" + num(r.height()*f.k) + "h-" + w + "z")
	}
	return b.String()
}

// solidCell says which cells block and are not merely unknown, and unknownCell
// which were never seen, whatever the floor's policy on them.
func solidCell(c *client.FloorContent) func(col, row int) bool {
	return func(col, row int) bool { return c.At(col, row) == floor.Occupied }
}

func unknownCell(c *client.FloorContent) func(col, row int) bool {
	return func(col, row int) bool { return c.At(col, row) == floor.Unknown }
}

// blocks says which cells a robot cannot pass.
func blocks(c *client.FloorContent) func(col, row int) bool {
	return func(col, row int) bool {
		o := c.At(col, row)
		return o == floor.Occupied || o == floor.Unknown && !c.Settings.GetUnknownIsFree()
	}
}
