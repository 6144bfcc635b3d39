package picture

import (
	"math"
	"testing"

	"pgregory.net/rapid"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// raw makes a floor of cells alone; origin off zero, so that it is not forgotten.
func raw(cols, rows int, cell func(col, row int) byte) *client.FloorContent {
	c := &client.FloorContent{
		Settings: &wideberthv1.FloorSettings{ResolutionM: proto.Float64(0.05), Columns: int32(cols), Rows: int32(rows), Origin: &wideberthv1.Point{XM: -3, YM: 2}},
		Cells:    make([]byte, (cols*rows+3)/4),
	}
	for row := range rows {
		for col := range cols {
			i := row*cols + col
			c.Cells[i>>2] |= cell(col, row) << (2 * (i & 3))
		}
	}
	return c
}

// The rectangles cover the cells asked for, each once, and no other.
func TestRectanglesAreTheCells(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		cols, rows := rapid.IntRange(1, 12).Draw(t, "cols"), rapid.IntRange(1, 12).Draw(t, "rows")
		bits := rapid.SliceOfN(rapid.ByteRange(0, 2), cols*rows, cols*rows).Draw(t, "cells")
		c := raw(cols, rows, func(col, row int) byte { return bits[row*cols+col] })
		is := blocks(c)
		covered := make([]int, cols*rows)
		for _, r := range cellRects(c, frame{area: floorBox(c.Settings), k: 100}, is).rects {
			index := func(m, o float64) int { return int(math.Round((m - o) / 0.05)) }
			for row := index(r.minY, 2); row < index(r.maxY, 2); row++ {
				for col := index(r.minX, -3); col < index(r.maxX, -3); col++ {
					covered[row*cols+col]++
				}
			}
		}
		for i, n := range covered {
			want := 0
			if is(i%cols, i/cols) {
				want = 1
			}
			if n != want {
				t.Fatalf("cell %d, %d is covered %d times, want %d", i%cols, i/cols, n, want)
			}
		}
	})
}

// A raster that is all speckle is drawn coarser, and then hides no solid.
func TestSpeckleIsDrawnCoarserAndLosesNothing(t *testing.T) {
	const side = 500 // 125,000 single cells, three times what is drawn one by one
	c := raw(side, side, func(col, row int) byte { return byte((col + row) % 2) })
	r := cellRects(c, frame{area: floorBox(c.Settings), k: 100}, blocks(c))
	if len(r.rects) > maxRasterRects || r.cellM <= 0.05 {
		t.Fatalf("%d rectangles of cells of %v m", len(r.rects), r.cellM)
	}
	for i := range side * side {
		col, row := i%side, i/side
		if (col+row)%2 == 0 {
			continue
		}
		p := xy{-3 + (float64(col)+0.5)*0.05, 2 + (float64(row)+0.5)*0.05}
		held := false
		for _, b := range r.rects {
			if b.holds(p) {
				held = true
				break
			}
		}
		if !held {
			t.Fatalf("cell %d, %d is solid and not drawn", col, row)
		}
		if i > side*4 {
			break // some rows are enough: the pattern repeats
		}
	}
}

// The half widths of the doors, and other distances the description gives by itself.
func TestClearanceIsWhatTheDescriptionGives(t *testing.T) {
	l, before, _ := hall(t)
	all := floorBox(l.Settings)
	r := newRoom(before, all, 0)
	for _, c := range []struct {
		what string
		at   xy
		want float64
	}{
		{"middle of the 0.90 m door", xy{14.03, 66}, 0.45},
		{"middle of the 1.10 m door", xy{38.5, 66}, 0.55},
		{"middle of the 1.60 m door", xy{63.2, 66}, 0.80},
		{"between the conveyors, 2.00 m apart", xy{107.1878, 33.1686}, 1.00},
		{"inside a column", xy{37.1, 17}, 0},
		{"inside the stand", xy{110, 55}, 0},
		{"half a metre below bay A's first trolley", xy{8.2, 13.5}, 0.5},
	} {
		if got := r.clearance(c.at, 5); math.Abs(got-c.want) > 2e-4 { // coordinates are given to a tenth of a millimetre
			t.Errorf("%s: %v m, want %v", c.what, got, c.want)
		}
	}
}
