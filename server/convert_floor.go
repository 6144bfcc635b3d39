package server

import (
	"encoding/hex"

	"google.golang.org/protobuf/types/known/timestamppb"

	"example.com/wideberth/mapstore"
	pb "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/proto/wire"
)

// The conversions take messages that their validators have passed. What client and
// server must read alike is proto/wire's.

func digestOut(d [32]byte) string { return hex.EncodeToString(d[:]) }

func stampOut(v mapstore.VersionInfo) *pb.VersionStamp {
	return &pb.VersionStamp{Floor: v.Floor, Version: v.Version, Digest: digestOut(v.Digest)}
}

func versionOut(v mapstore.VersionInfo) *pb.Version {
	return &pb.Version{
		Kind:            versionKinds.out(v.Kind),
		Stamp:           stampOut(v),
		BaseVersion:     v.Base,
		Author:          v.Author,
		Reason:          v.Reason,
		RequestId:       v.RequestID,
		PushTime:        timestamppb.New(v.Time),
		EditCount:       int32(v.EditCount),
		Touched:         wire.AreaOut(v.Touched),
		RestoredVersion: v.Restored,
	}
}

func floorOut(i mapstore.FloorInfo) *pb.Floor {
	out := &pb.Floor{
		Id:            i.ID,
		Settings:      wire.SettingsOut(i.Settings),
		Head:          stampOut(i.Head),
		OldestVersion: i.Oldest,
	}
	if !i.Created.IsZero() {
		out.CreateTime = timestamppb.New(i.Created)
	}
	return out
}
