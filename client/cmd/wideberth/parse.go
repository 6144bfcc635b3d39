package main

import (
	"fmt"
	"math"
	"path/filepath"
	"strconv"
	"strings"

	"google.golang.org/protobuf/encoding/protojson"

	"example.com/wideberth/client/patchfile"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// numbers reads finite numbers with commas between.
func numbers(text string) ([]float64, error) {
	var out []float64
	for _, part := range strings.Split(text, ",") {
		v, err := strconv.ParseFloat(strings.TrimSpace(part), 64)
		if err != nil || math.IsNaN(v) || math.IsInf(v, 0) {
			return nil, fmt.Errorf("%q is not a number", part)
		}
		out = append(out, v)
	}
	return out, nil
}

// place reads an end of a route: a station's name, or x,y or x,y,heading in metres
// and radians. Stations' names have no comma.
func place(flag, text string) (*wideberthv1.Place, error) { return placeArg("--"+flag, text) }

// placeArg is place for what name stands for on the command line.
func placeArg(name, text string) (*wideberthv1.Place, error) {
	if text == "" {
		return nil, usagef("%s is missing: a station, or x,y or x,y,heading", name)
	}
	if !strings.Contains(text, ",") {
		return &wideberthv1.Place{Where: &wideberthv1.Place_Station{Station: text}}, nil
	}
	v, err := numbers(text)
	if err != nil || len(v) > 3 {
		return nil, usagef("%s is %q, want a station, or x,y or x,y,heading", name, text)
	}
	pose := &wideberthv1.Pose{XM: v[0], YM: v[1]}
	if len(v) == 3 {
		pose.HeadingRad = v[2]
	}
	return &wideberthv1.Place{Where: &wideberthv1.Place_Pose{Pose: pose}}, nil
}

// readBody reads a Body message in JSON; a member it does not have is an error.
func readBody(path string) (*wideberthv1.Body, error) {
	data, err := readFile(path, maxBodyBytes)
	if err != nil {
		return nil, err
	}
	body := &wideberthv1.Body{}
	if err := protojson.Unmarshal(data, body); err != nil {
		return nil, &patchfile.Error{File: path, Problem: strings.TrimLeft(strings.TrimPrefix(err.Error(), "proto:"), " \u00a0")}
	}
	return body, nil
}

// choice reads an enum's value by its name without prefix.
func choice(flag, text, prefix string, values map[string]int32, want string) (int32, error) {
	v, ok := values[prefix+strings.ToUpper(text)]
	if !ok || v == 0 {
		return 0, usagef("--%s is %q, want %s", flag, text, want)
	}
	return v, nil
}

// preferenceNames are what --preference takes.
const preferenceNames = "shortest, balanced or clearest"

const (
	// roadmapNames are what plan's --roadmap takes.
	roadmapNames = "auto, grid4, grid8, quadtree, convex-cells, visibility-graph, meadow-map, voronoi-graph or exact-cells"
	// shownNames are the roadmaps that can be shown and compared.
	shownNames = "grid4, grid8, quadtree, visibility-graph, meadow-map, voronoi-graph or exact-cells"
)

// roadmap reads --roadmap; auto leaves it to the service.
func roadmap(text string) (wideberthv1.Roadmap, error) {
	if text == "auto" {
		return wideberthv1.Roadmap_ROADMAP_UNSPECIFIED, nil
	}
	v, err := choice("roadmap", strings.ReplaceAll(text, "-", "_"), "ROADMAP_", wideberthv1.Roadmap_value, roadmapNames)
	return wideberthv1.Roadmap(v), err
}

// shown reads the name of a roadmap that can be shown.
func shown(text string) (wideberthv1.Roadmap, error) {
	if text == "" {
		return 0, usagef("--roadmap is missing: %s", shownNames)
	}
	v, err := choice("roadmap", strings.ReplaceAll(text, "-", "_"), "ROADMAP_", wideberthv1.Roadmap_value, shownNames)
	if wideberthv1.Roadmap(v) == wideberthv1.Roadmap_ROADMAP_CONVEX_CELLS {
		return 0, usagef("--roadmap is %q, want %s", text, shownNames)
	}
	return wideberthv1.Roadmap(v), err
}

// roadmapWord is a roadmap's name as --roadmap takes it.
func roadmapWord(k wideberthv1.Roadmap) string {
	return strings.ReplaceAll(word(k, "ROADMAP_"), " ", "-")
}

// areaOf reads a rectangle, min_x,min_y,max_x,max_y in metres.
func areaOf(text string) (*wideberthv1.Area, error) {
	v, err := numbers(text)
	if err != nil || len(v) != 4 || v[0] >= v[2] || v[1] >= v[3] {
		return nil, usagef("--area is %q, want min_x,min_y,max_x,max_y in metres, min below max", text)
	}
	return &wideberthv1.Area{MinXM: v[0], MinYM: v[1], MaxXM: v[2], MaxYM: v[3]}, nil
}

// splitPath gives a file's folder and name.
func splitPath(path string) (dir, base string) { return filepath.Dir(path), filepath.Base(path) }
