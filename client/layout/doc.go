// Package layout reads a floor from a description that people write and review: a
// YAML file that names walls, doors, rows of trolleys, zones, stations and
// bodies in metres. What comes out are the settings and the edits of the
// contract, ready to be sent as patches.
//
// A description looks like this:
//
//	format: 1
//	floor: auction-hall
//	title: The night shift at the auction hall
//	width_m: 120
//	height_m: 80
//	resolution_m: 0.05        # default
//	initial: free             # every cell, before the items; default unknown
//	bodies:
//	  - name: tug
//	    radius_m: 0.58
//	    margin_m: 0.07
//	items:                    # in order; a later cell paints over an earlier one
//	  - wall: wall/south      # a thick line with round ends
//	    width_m: 0.3
//	    points: [[1, 5], [20, 5]]
//	  - block: tribune        # a filled rectangle or polygon
//	    rect: [100, 52, 117, 64]
//	  - column: column        # a disc
//	    at: [37, 20]
//	    radius_m: 0.3
//	    repeat: [{count: 3, step_m: [0, 12]}]   # column-1, column-2, column-3
//	  - cells: occupied       # raster; a row of trolleys
//	    rect: [8, 16, 8.55, 17.35]
//	    repeat: [{count: 40, step_m: [0.65, 0], gap_every: 10, gap_m: [1.3, 0]}]
//	  - closed: hand-picking  # zones: closed, speed_limit, one_way
//	    rect: [72, 46, 84, 54]
//	  - station: dock-1
//	    at: [12, 8]
//	    heading_deg: 90       # counter-clockwise from +x
//	changes:                  # named patches, to be pushed later
//	  - name: two-o-clock
//	    reason: Trolleys parked across the aisle
//	    items:
//	      - cells: occupied
//	        rect: [34, 40, 40, 42]
//	      - remove: column-1
//	      - clear: [40, 40, 50, 42]
//
// A rectangle is [min x, min y, max x, max y]. A cells rectangle sets the cells
// whose open square meets it, so one that lies on the grid sets exactly its own
// cells; a cells polygon sets those whose closed square meets it. Everything else
// about a shape (that a polygon is simple, that a name is free) is judged by the
// service, which is told the description's words unchanged.
//
// Faults name the file, the line and the field, and come together rather than
// one at a time. Reading is bounded: see the limits in this package.
package layout
