package server

import (
	"context"
	"slices"
	"strconv"
	"strings"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

// Bounds on answers, from the contract.
const (
	maxPatchBytes  = 3 << 20 // GetVersionResponse.patch
	maxDifferences = 1000    // CompareVersionsResponse.changed_areas and .features
	maxCompareSize = 3 << 20 // bytes of CompareVersionsResponse.features; beyond it the list is cut
)

// floorService carries out FloorService. Requests reach it checked.
type floorService struct {
	pb.UnimplementedFloorServiceServer
	s *Server
}

func (v floorService) CreateFloor(ctx context.Context, r *pb.CreateFloorRequest) (*pb.CreateFloorResponse, error) {
	info, err := v.s.store.CreateFloor(ctx, r.Floor, wire.SettingsIn(r.Settings), r.Author, r.RequestId)
	if err != nil {
		return nil, statusOf(ctx, err, subject{floor: r.Floor})
	}
	v.s.worlds.follow(r.Floor)
	note(ctx, r.Floor, info.Head.Version)
	return &pb.CreateFloorResponse{Floor: floorOut(info)}, nil
}

func (v floorService) GetFloor(ctx context.Context, r *pb.GetFloorRequest) (*pb.GetFloorResponse, error) {
	info, err := v.s.store.Floor(r.Floor)
	if err != nil {
		return nil, statusOf(ctx, err, subject{floor: r.Floor})
	}
	note(ctx, r.Floor, info.Head.Version)
	return &pb.GetFloorResponse{Floor: floorOut(info)}, nil
}

func (v floorService) ListFloors(ctx context.Context, r *pb.ListFloorsRequest) (*pb.ListFloorsResponse, error) {
	var f faults
	after := pageStart("floors", r.PageToken, &f)
	if f.any() {
		return nil, statusOf(ctx, f.err(), subject{})
	}
	all := v.s.store.Floors()
	start, found := slices.BinarySearchFunc(all, after, func(i mapstore.FloorInfo, id string) int { return strings.Compare(i.ID, id) })
	if found {
		start++
	}
	all = all[start:]
	out := &pb.ListFloorsResponse{}
	if n := pageSize(r.PageSize); len(all) > n {
		all = all[:n]
		out.NextPageToken = pageToken("floors", all[n-1].ID)
	}
	for _, i := range all {
		out.Floors = append(out.Floors, floorOut(i))
	}
	return out, nil
}

func (v floorService) PushPatch(ctx context.Context, r *pb.PushPatchRequest) (*pb.PushPatchResponse, error) {
	about := subject{floor: r.Floor, version: r.Patch.BaseVersion, editsAt: "patch.edits"}
	info, err := v.s.store.Floor(r.Floor)
	if err != nil {
		return nil, statusOf(ctx, err, subject{floor: r.Floor})
	}
	about.head, about.oldest = info.Head, info.Oldest
	var f faults
	edits := editsIn(r.Patch.Edits, info.Settings, root.at("patch").at("edits"), &f)
	if f.any() {
		return nil, statusOf(ctx, f.err(), about)
	}
	version, repeated, err := v.s.store.Push(ctx, r.Floor, mapstore.Patch{
		Base: r.Patch.BaseVersion, Author: r.Patch.Author, Reason: r.Patch.Reason, RequestID: r.RequestId,
		Edits: edits, ValidateOnly: r.ValidateOnly, AllowRebase: r.AllowRebase,
	})
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	note(ctx, r.Floor, version.Version)
	return &pb.PushPatchResponse{Version: versionOut(version), RepeatedRequest: repeated}, nil
}

func (v floorService) ListVersions(ctx context.Context, r *pb.ListVersionsRequest) (*pb.ListVersionsResponse, error) {
	about := subject{floor: r.Floor}
	list := "versions of " + r.Floor
	var f faults
	before := pageVersion(list, r.PageToken, &f)
	if f.any() {
		return nil, statusOf(ctx, f.err(), about)
	}
	n := pageSize(r.PageSize)
	got, err := v.s.store.Versions(ctx, r.Floor, before, n)
	if err != nil {
		return nil, statusOf(ctx, v.s.complete(err, &about), about)
	}
	out := &pb.ListVersionsResponse{}
	for _, i := range got {
		out.Versions = append(out.Versions, versionOut(i))
	}
	if len(got) == n && got[n-1].Version > 1 {
		out.NextPageToken = pageToken(list, strconv.FormatInt(got[n-1].Version, 10))
	}
	return out, nil
}

func (v floorService) GetVersion(ctx context.Context, r *pb.GetVersionRequest) (*pb.GetVersionResponse, error) {
	snap, about, err := v.s.resolve(ctx, r.Floor, r.Version)
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	note(ctx, r.Floor, snap.Info.Version)
	out := &pb.GetVersionResponse{Version: versionOut(snap.Info)}
	edits, err := v.s.store.Edits(ctx, r.Floor, snap.Info.Version)
	if err != nil {
		return nil, statusOf(ctx, v.s.complete(err, &about), about)
	}
	if len(edits) == 0 {
		return out, nil
	}
	set := snap.Map.Settings()
	patch := &pb.Patch{BaseVersion: snap.Info.Base, Author: snap.Info.Author, Reason: snap.Info.Reason}
	size := proto.Size(patch)
	for _, e := range edits {
		edit, err := editOut(e, set)
		if err != nil {
			return nil, statusOf(ctx, err, about)
		}
		if size += proto.Size(edit) + editOverhead; size > maxPatchBytes {
			return out, nil // too large to send back
		}
		patch.Edits = append(patch.Edits, edit)
	}
	out.Patch = patch
	return out, nil
}

// editOverhead is what an item of a list adds to its own size on the wire, at most.
const editOverhead = 6

func (v floorService) CompareVersions(ctx context.Context, r *pb.CompareVersionsRequest) (*pb.CompareVersionsResponse, error) {
	about := subject{floor: r.Floor}
	from, err := v.s.at(ctx, r.Floor, r.FromVersion, &about)
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	to, err := v.s.headOr(ctx, r.Floor, r.ToVersion, &about)
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	note(ctx, r.Floor, to.Info.Version)
	change := floor.Diff(from.Map, to.Map)
	out := &pb.CompareVersionsResponse{From: stampOut(from.Info), To: stampOut(to.Info), ChangedCells: change.CellCount}
	set := to.Map.Settings()
	rects := mergeRects(change.Cells)
	for _, c := range rects[:min(len(rects), maxDifferences)] {
		out.ChangedAreas = append(out.ChangedAreas, wire.AreaOut(set.CellBounds(c)))
	}
	out.Truncated = len(rects) > maxDifferences
	size := 0
	for _, c := range change.Features {
		d := &pb.FeatureDifference{Before: wire.FeatureOut(c.Before), After: wire.FeatureOut(c.After)}
		if d.Name = d.After.GetName(); c.After == nil {
			d.Name = d.Before.GetName()
		}
		if size += proto.Size(d); size > maxCompareSize || len(out.Features) == maxDifferences {
			out.Truncated = true
			break
		}
		out.Features = append(out.Features, d)
	}
	return out, nil
}

// headOr is a version, or the head for 0.
func (s *Server) headOr(ctx context.Context, floor string, version int64, about *subject) (*mapstore.Snapshot, error) {
	if version == 0 {
		return s.store.Head(floor)
	}
	return s.at(ctx, floor, version, about)
}

// mergeRects joins rectangles of cells that share a whole side, first along rows,
// then upwards. The order and the outcome depend on the cells alone.
func mergeRects(in []floor.CellRect) []floor.CellRect {
	rects := slices.Clone(in)
	slices.SortFunc(rects, func(a, b floor.CellRect) int {
		return cmpInts(a.Y0, b.Y0, a.Y1, b.Y1, a.X0, b.X0, a.X1, b.X1)
	})
	rects = fold(rects, func(a, b floor.CellRect) bool { return a.Y0 == b.Y0 && a.Y1 == b.Y1 && a.X1 == b.X0 })
	slices.SortFunc(rects, func(a, b floor.CellRect) int {
		return cmpInts(a.X0, b.X0, a.X1, b.X1, a.Y0, b.Y0, a.Y1, b.Y1)
	})
	rects = fold(rects, func(a, b floor.CellRect) bool { return a.X0 == b.X0 && a.X1 == b.X1 && a.Y1 == b.Y0 })
	slices.SortFunc(rects, func(a, b floor.CellRect) int {
		return cmpInts(a.Y0, b.Y0, a.X0, b.X0, a.Y1, b.Y1, a.X1, b.X1)
	})
	return rects
}

// fold joins neighbours in a sorted list for which joins holds.
func fold(rects []floor.CellRect, joins func(a, b floor.CellRect) bool) []floor.CellRect {
	out := rects[:0]
	for _, r := range rects {
		if n := len(out); n > 0 && joins(out[n-1], r) {
			out[n-1] = out[n-1].Union(r)
			continue
		}
		out = append(out, r)
	}
	return out
}

// cmpInts compares pairs of numbers one after the other.
func cmpInts(pairs ...int) int {
	for i := 0; i < len(pairs); i += 2 {
		if d := pairs[i] - pairs[i+1]; d != 0 {
			return d
		}
	}
	return 0
}

func (v floorService) RestoreVersion(ctx context.Context, r *pb.RestoreVersionRequest) (*pb.RestoreVersionResponse, error) {
	about := subject{floor: r.Floor, version: r.BaseVersion}
	info, err := v.s.store.Floor(r.Floor)
	if err != nil {
		return nil, statusOf(ctx, err, subject{floor: r.Floor})
	}
	about.head, about.oldest = info.Head, info.Oldest
	if r.RestoredVersion > info.Head.Version {
		about.version = r.RestoredVersion
		return nil, statusOf(ctx, errNoVersion, about)
	}
	version, repeated, err := v.s.store.Restore(ctx, r.Floor, mapstore.Restore{
		Version: r.RestoredVersion, Base: r.BaseVersion, Author: r.Author, Reason: r.Reason, RequestID: r.RequestId,
	})
	if err != nil {
		return nil, statusOf(ctx, err, about)
	}
	note(ctx, r.Floor, version.Version)
	return &pb.RestoreVersionResponse{Version: versionOut(version), RepeatedRequest: repeated}, nil
}
