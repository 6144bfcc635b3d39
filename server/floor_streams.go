package server

import (
	"context"
	"errors"

	"google.golang.org/grpc"
	"google.golang.org/grpc/metadata"
	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

// Bounds on ReadFloor's messages.
const (
	maxReadBytes   = 1 << 20  // of a whole message, from the contract
	readOverhead   = 1 << 10  // of a message beside its cells
	featureBatch   = 64 << 10 // bytes of features after which a batch is sent
	cellsPerRead   = (maxReadBytes - readOverhead) * 4
	readRowsAtOnce = floor.BlockSize // rows of a message are a multiple of it where they fit
)

func (v floorService) ReadFloor(r *pb.ReadFloorRequest, stream grpc.ServerStreamingServer[pb.ReadFloorResponse]) error {
	ctx := stream.Context()
	snap, about, err := v.s.resolve(ctx, r.Floor, r.Version)
	if err != nil {
		return statusOf(ctx, err, about)
	}
	note(ctx, r.Floor, snap.Info.Version)
	set := snap.Map.Settings()
	if err := stream.Send(&pb.ReadFloorResponse{Part: &pb.ReadFloorResponse_Header{
		Header: &pb.ReadFloorHeader{Stamp: stampOut(snap.Info), Settings: wire.SettingsOut(set)}}}); err != nil {
		return err
	}
	end := &pb.ReadFloorEnd{}
	if !r.SkipOccupancy {
		rect := set.AllCells()
		if r.Area != nil {
			rect = set.CellRectOf(wire.AreaIn(r.Area))
		}
		if end.CellCount, err = sendCells(ctx, snap.Map, rect, stream); err != nil {
			return statusOf(ctx, err, about)
		}
	}
	if !r.SkipFeatures {
		meets := func(*floor.Feature) bool { return true }
		if r.Area != nil {
			area := wire.AreaIn(r.Area)
			meets = func(t *floor.Feature) bool { return featureMeets(t, area) }
		}
		if end.FeatureCount, err = sendFeatures(ctx, snap.Map, meets, stream); err != nil {
			return statusOf(ctx, err, about)
		}
	}
	return stream.Send(&pb.ReadFloorResponse{Part: &pb.ReadFloorResponse_End{End: end}})
}

// sendCells sends a rectangle from its lowest rows up, whole rows a message.
func sendCells(ctx context.Context, m *floor.Map, all floor.CellRect, stream grpc.ServerStreamingServer[pb.ReadFloorResponse]) (n int64, err error) {
	if all.IsEmpty() {
		return 0, nil
	}
	rows := cellsPerRead / (all.X1 - all.X0)
	if rows > readRowsAtOnce {
		rows -= rows % readRowsAtOnce
	}
	for y := all.Y0; y < all.Y1; y += rows {
		if err := ctx.Err(); err != nil {
			return n, err
		}
		part := floor.CellRect{X0: all.X0, X1: all.X1, Y0: y, Y1: min(y+rows, all.Y1)}
		// Fresh bytes for each message: a sent message must not change.
		cells := m.ReadCells(make([]byte, 0, wire.CellBytes(part.Count())), part)
		block, err := wire.BlockOut(part, cells)
		if err != nil {
			return n, err
		}
		if err := stream.Send(&pb.ReadFloorResponse{Part: &pb.ReadFloorResponse_Cells{Cells: block}}); err != nil {
			return n, err
		}
		n += part.Count()
	}
	return n, nil
}

// sendFeatures sends features by name, in batches well below maxReadBytes but for a
// single large one, which validation keeps below it.
func sendFeatures(ctx context.Context, m *floor.Map, meets func(*floor.Feature) bool, stream grpc.ServerStreamingServer[pb.ReadFloorResponse]) (n int64, err error) {
	batch, size := &pb.FeatureBatch{}, 0
	flush := func() error {
		if len(batch.Features) == 0 {
			return nil
		}
		if err := ctx.Err(); err != nil {
			return err
		}
		err := stream.Send(&pb.ReadFloorResponse{Part: &pb.ReadFloorResponse_Features{Features: batch}})
		batch, size = &pb.FeatureBatch{}, 0
		return err
	}
	for t := range m.Features() {
		if !meets(t) {
			continue
		}
		out := wire.FeatureOut(t)
		s := proto.Size(out)
		if size+s > featureBatch {
			if err := flush(); err != nil {
				return n, err
			}
		}
		batch.Features = append(batch.Features, out)
		size += s
		n++
	}
	return n, flush()
}

// featureMeets says whether a feature shares a point with an area.
func featureMeets(t *floor.Feature, area geom.Rect) bool {
	if t.Kind == floor.Station {
		return area.Contains(t.At)
	}
	return t.Shape.RectDist(area) <= 0
}

func (v floorService) WatchVersions(r *pb.WatchVersionsRequest, stream grpc.ServerStreamingServer[pb.WatchVersionsResponse]) error {
	ctx := stream.Context()
	about := subject{floor: r.Floor, version: r.AfterVersion}
	watch, err := v.s.store.Watch(r.Floor, r.AfterVersion)
	if err != nil {
		return statusOf(ctx, v.s.complete(err, &about), about)
	}
	defer watch.Close()
	note(ctx, r.Floor, r.AfterVersion)
	// The header tells a client that it is being served before anything is new.
	if err := stream.SendHeader(metadata.MD{}); err != nil {
		return err
	}
	for {
		out, err := v.nextEvent(ctx, r.Floor, watch)
		if err != nil {
			return statusOf(ctx, err, about)
		}
		if err := stream.Send(out); err != nil {
			return err
		}
	}
}

// nextEvent is the next version, or a heartbeat when none comes in time.
func (v floorService) nextEvent(ctx context.Context, id string, watch *mapstore.Watch) (*pb.WatchVersionsResponse, error) {
	wait, cancel := context.WithTimeout(ctx, v.s.cfg.Heartbeat)
	defer cancel()
	event, err := watch.Next(wait)
	switch {
	case err == nil:
		note(ctx, id, event.Info.Version)
		return &pb.WatchVersionsResponse{Event: &pb.WatchVersionsResponse_Version{
			Version: &pb.VersionEvent{Version: versionOut(event.Info), Skipped: event.Skipped}}}, nil
	case ctx.Err() == nil && errors.Is(err, context.DeadlineExceeded):
		head, err := v.s.store.Head(id)
		if err != nil {
			return nil, err
		}
		return &pb.WatchVersionsResponse{Event: &pb.WatchVersionsResponse_Heartbeat{
			Heartbeat: &pb.Heartbeat{Head: stampOut(head.Info)}}}, nil
	case ctx.Err() != nil:
		return nil, ctx.Err()
	}
	return nil, err
}
