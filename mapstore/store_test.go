package mapstore_test

import (
	"context"
	"errors"
	"fmt"
	"reflect"
	"strings"
	"sync"
	"testing"
	"time"

	"example.com/wideberth/mapstore"
	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	"example.com/wideberth/mapstore/journal"
	"example.com/wideberth/mapstore/journal/memjournal"
)

func TestCreateFloor(t *testing.T) {
	at := time.Date(2024, 2, 14, 2, 14, 0, 123_456_789, time.FixedZone("", 3600))
	s := openStore(t, new(memjournal.Storage).Open(), mapstore.Options{Now: func() time.Time { return at }})
	if _, err := s.Floor("hall"); !errors.Is(err, mapstore.ErrNoFloor) {
		t.Errorf("a floor that is not there: %v", err)
	}
	f, err := s.CreateFloor(t.Context(), "hall", hall, "surveyor", "first")
	must(t, err)
	want := mapstore.VersionInfo{Floor: "hall", Version: 1, Digest: f.Head.Digest, Kind: journal.Created, Author: "surveyor",
		RequestID: "first", Time: at.UTC().Truncate(time.Microsecond), Touched: geom.EmptyRect()}
	if f.ID != "hall" || f.Settings != hall || f.Oldest != 1 || !f.Created.Equal(want.Time) || f.Head != want {
		t.Errorf("floor is %+v, want head %+v", f, want)
	}
	push(t, s, "hall", trolley("t", 1_000_000, 1_000_000))
	again, err := s.CreateFloor(t.Context(), "hall", hall, "surveyor", "first")
	if err != nil || again.Head.Version != 2 || again.Created != f.Created {
		t.Errorf("the same call again gives %+v, %v", again, err)
	}
	other := hall
	other.Rows++
	_, err = s.CreateFloor(t.Context(), "hall", other, "surveyor", "")
	wantErr(t, "other settings", err, mapstore.ErrFloorExists)

	other.ResolutionUm = 1
	_, err = s.CreateFloor(t.Context(), "dock", other, "surveyor", "")
	if e, ok := errors.AsType[floor.SettingsError](err); !ok || e[0].Field != "resolution_m" {
		t.Errorf("a resolution of 1 µm: %v", err)
	}
	create(t, s, "dock")
	list := s.Floors()
	if len(list) != 2 || list[0].ID != "dock" || list[1].ID != "hall" || list[1].Head.Version != 2 {
		t.Errorf("floors are %+v", list)
	}
}

func TestFloorLimit(t *testing.T) {
	disk := new(memjournal.Storage)
	s := openStore(t, disk.Open(), mapstore.Options{})
	tiny := floor.Settings{ResolutionUm: 50_000, Columns: 1, Rows: 1, CapUm: 50_000}
	for i := range mapstore.MaxFloors {
		_, err := s.CreateFloor(t.Context(), fmt.Sprintf("f%d", i), tiny, "surveyor", "")
		must(t, err)
	}
	_, err := s.CreateFloor(t.Context(), "more", tiny, "surveyor", "")
	wantErr(t, "one floor more", err, mapstore.ErrFloorLimit)
	if _, err := s.CreateFloor(t.Context(), "f0", tiny, "surveyor", ""); err != nil {
		t.Errorf("a floor that is there: %v", err)
	}
}

func TestPush(t *testing.T) {
	s, _ := memory(t, mapstore.Options{})
	p := patch(1, trolley("t", 1_000_000, 2_000_000), paint(0, 0, 2, 1, floor.Occupied))
	p.RequestID = "r1"
	v, repeated, err := s.Push(t.Context(), "hall", p)
	must(t, err)
	h := head(t, s, "hall")
	want := mapstore.VersionInfo{Floor: "hall", Version: 2, Digest: h.Map.Digest(), Kind: journal.Patched, Base: 1, Author: p.Author,
		Reason: p.Reason, RequestID: "r1", Time: v.Time, EditCount: 2,
		Touched: geom.Rect{Min: geom.Point{X: 0, Y: 0}, Max: geom.Point{X: 1_200_000, Y: 2_200_000}}}
	if v != want || repeated || h.Info != want {
		t.Errorf("version is %+v, head %+v, want %+v", v, h.Info, want)
	}
	if _, ok := h.Map.Feature("t"); !ok || h.Map.At(1, 0) != floor.Occupied || h.Map.At(2, 0) != floor.Free {
		t.Error("the edits are not in the head")
	}
	edits, err := s.Edits(t.Context(), "hall", 2)
	if err != nil || !reflect.DeepEqual(edits, p.Edits) {
		t.Errorf("edits are %+v, %v, want %+v", edits, err, p.Edits)
	}
	if edits, err := s.Edits(t.Context(), "hall", 1); edits != nil || err != nil {
		t.Errorf("edits of a created version are %+v, %v", edits, err)
	}
	// What was passed in stays the caller's.
	digest := h.Map.Digest()
	p.Edits[0].Feature.Shape.Chains[0][0].X = 3_000_000
	next := push(t, s, "hall", remove("t"))
	back, _, err := s.Restore(t.Context(), "hall", mapstore.Restore{Version: 2, Base: next.Version, Author: "a", Reason: "r"})
	if err != nil || back.Digest != digest || head(t, s, "hall").Map.Digest() != digest {
		t.Errorf("writing to a pushed edit changed the map: %v", err)
	}
	f, _ := h.Map.Feature("t")
	if f.Shape.Chains[0][0].X != 1_000_000 {
		t.Error("writing to a pushed edit changed a version")
	}
}

func TestRefusedArguments(t *testing.T) {
	s, _ := memory(t, mapstore.Options{})
	good := patch(1, trolley("t", 1_000_000, 1_000_000))
	for field, change := range map[string]func(*mapstore.Patch){
		"patch.base_version": func(p *mapstore.Patch) { p.Base = 0 },
		"patch.author":       func(p *mapstore.Patch) { p.Author = "" },
		"patch.author ":      func(p *mapstore.Patch) { p.Author = strings.Repeat("ä", mapstore.MaxAuthorRunes+1) },
		"patch.reason":       func(p *mapstore.Patch) { p.Reason = "\xff" },
		"patch.reason ":      func(p *mapstore.Patch) { p.Reason = strings.Repeat("x", mapstore.MaxReasonRunes+1) },
		"patch.edits":        func(p *mapstore.Patch) { p.Edits = nil },
		"patch.edits ":       func(p *mapstore.Patch) { p.Edits = make([]floor.Edit, floor.MaxEdits+1) },
		"request_id":         func(p *mapstore.Patch) { p.RequestID = "a\n" },
		"request_id ":        func(p *mapstore.Patch) { p.RequestID = strings.Repeat("x", mapstore.MaxRequestIDBytes+1) },
	} {
		p := good
		change(&p)
		_, _, err := s.Push(t.Context(), "hall", p)
		if e, ok := errors.AsType[*mapstore.ArgumentError](err); !ok || e.Field != strings.TrimSpace(field) || !strings.Contains(e.Problem, ",") && !strings.Contains(e.Problem, "not UTF-8") {
			t.Errorf("%s: %v", field, err)
		}
	}
	for _, id := range []string{"", "Hall", "1hall", "hall_1", "hall/", strings.Repeat("h", 64), "hall\x00"} {
		_, err := s.CreateFloor(t.Context(), id, hall, "surveyor", "")
		if e, ok := errors.AsType[*mapstore.ArgumentError](err); !ok || e.Field != "floor" {
			t.Errorf("floor %q: %v", id, err)
		}
		_, _, err = s.Push(t.Context(), id, good)
		wantErr(t, "pushing to floor "+id, err, mapstore.ErrNoFloor)
	}
	bad := good
	bad.Edits = []floor.Edit{good.Edits[0], remove("u")}
	_, _, err := s.Push(t.Context(), "hall", bad)
	if e, ok := errors.AsType[*floor.EditError](err); !ok || e.Index != 1 || e.Path != "remove_feature.name" {
		t.Errorf("removing what is not there: %v", err)
	}
	bad.Edits = []floor.Edit{{Kind: floor.PutFeature}}
	_, _, err = s.Push(t.Context(), "hall", bad)
	if _, ok := errors.AsType[*floor.EditError](err); !ok {
		t.Errorf("no feature: %v", err)
	}
	for field, r := range map[string]mapstore.Restore{
		"restored_version": {Base: 1, Author: "a", Reason: "r"},
		"base_version":     {Version: 1, Author: "a", Reason: "r"},
		"author":           {Version: 1, Base: 1, Reason: "r"},
		"reason":           {Version: 1, Base: 1, Author: "a"},
		"request_id":       {Version: 1, Base: 1, Author: "a", Reason: "r", RequestID: "ä"},
	} {
		_, _, err := s.Restore(t.Context(), "hall", r)
		if e, ok := errors.AsType[*mapstore.ArgumentError](err); !ok || e.Field != field {
			t.Errorf("%s: %v", field, err)
		}
	}
	if h := head(t, s, "hall"); h.Info.Version != 1 {
		t.Errorf("refused pushes made version %d", h.Info.Version)
	}
	for _, o := range []mapstore.Options{{KeepVersions: -1}, {SnapshotEvery: -1}} {
		if _, _, err := mapstore.Open(t.Context(), new(memjournal.Storage).Open(), o); err == nil {
			t.Errorf("options %+v are accepted", o)
		}
	}
}

func TestStaleBase(t *testing.T) {
	s, _ := memory(t, mapstore.Options{})
	push(t, s, "hall", trolley("a", 1_000_000, 1_000_000), trolley("b", 2_000_000, 1_000_000), paint(100, 100, 110, 105, floor.Occupied))
	push(t, s, "hall", trolley("a", 1_500_000, 1_000_000), remove("b"), trolley("c", 3_000_000, 1_000_000), paint(0, 0, 3, 2, floor.Unknown),
		paint(150, 30, 151, 31, floor.Occupied), paint(170, 60, 171, 61, floor.Occupied)) // two corners of one block
	h := head(t, s, "hall")
	square := floor.NewPolygon([][]geom.Point{{{X: 0, Y: 0}, {X: 500_000, Y: 0}, {X: 500_000, Y: 500_000}}}, 0)
	for name, c := range map[string]struct {
		edits     []floor.Edit
		conflicts []string
	}{
		"same feature changed":  {[]floor.Edit{trolley("a", 1_000_000, 1_000_000)}, []string{`feature "a" was changed after version 2`}},
		"feature removed":       {[]floor.Edit{remove("b")}, []string{`feature "b" was removed after version 2`}},
		"feature added":         {[]floor.Edit{trolley("c", 1_000_000, 1_000_000)}, []string{`feature "c" was added after version 2`}},
		"cells":                 {[]floor.Edit{paint(2, 1, 9, 9, floor.Free)}, []string{"cells in columns 0 to 2, rows 0 to 1 were changed after version 2"}},
		"polygon":               {[]floor.Edit{{Kind: floor.PaintPolygon, Shape: square, Fill: floor.Free}}, []string{"cells in columns 0 to 2, rows 0 to 1 were changed after version 2"}},
		"both, once each":       {[]floor.Edit{trolley("a", 1, 1), remove("a"), paint(0, 0, 1, 1, 0), paint(1, 0, 2, 1, 0)}, []string{`feature "a" was changed after version 2`, "cells in columns 0 to 2, rows 0 to 1 were changed after version 2"}},
		"between changed cells": {[]floor.Edit{paint(150, 40, 170, 50, floor.Occupied), paint(151, 31, 152, 61, floor.Unknown)}, nil},
		"a changed cell again":  {[]floor.Edit{paint(150, 30, 151, 31, floor.Free)}, []string{"cells in columns 150 to 170, rows 30 to 60 were changed after version 2"}},
		"cells beside":          {[]floor.Edit{paint(3, 0, 9, 9, floor.Occupied)}, nil},
		"new feature there":     {[]floor.Edit{trolley("d", 1_500_000, 1_000_000)}, nil},
		"cells changed before":  {[]floor.Edit{paint(100, 100, 110, 105, floor.Free)}, nil},
	} {
		for _, rebase := range []bool{false, true} {
			p := patch(2, c.edits...)
			p.AllowRebase, p.ValidateOnly = rebase, true
			v, _, err := s.Push(t.Context(), "hall", p)
			if rebase && c.conflicts == nil {
				if err != nil || v.Version != 4 || v.Base != 2 {
					t.Errorf("%s: rebased to %+v, %v", name, v, err)
				}
				continue
			}
			e, ok := errors.AsType[*mapstore.StaleBaseError](err)
			if !ok || e.Base != 2 || e.Head != h.Info || !reflect.DeepEqual(e.Conflicts, c.conflicts) {
				t.Errorf("%s, rebasing allowed %v: %v", name, rebase, err)
			}
		}
	}
	_, _, err := s.Push(t.Context(), "hall", patch(4, trolley("d", 1, 1)))
	wantErr(t, "a base above the head", err, mapstore.ErrFutureVersion)
	if head(t, s, "hall") != h {
		t.Error("refused pushes changed the head")
	}
	// Many conflicts are cut short.
	var many []floor.Edit
	for i := range 50 {
		many = append(many, trolley(fmt.Sprintf("m%d", i), 1_000_000, 1_000_000))
	}
	push(t, s, "hall", many...)
	_, _, err = s.Push(t.Context(), "hall", patch(3, many...))
	if e, ok := errors.AsType[*mapstore.StaleBaseError](err); !ok || len(e.Conflicts) != mapstore.MaxConflicts {
		t.Errorf("50 conflicts: %v", err)
	}
}

// TestRebaseIsCarriedOutOnTheHead compares a rebased push with the same edits pushed
// onto the head.
func TestRebaseIsCarriedOutOnTheHead(t *testing.T) {
	s, _ := memory(t, mapstore.Options{KeepVersions: 2})
	for i := range 5 {
		push(t, s, "hall", trolley(fmt.Sprintf("t%d", i), 1_000_000, 1_000_000), paint(i, 0, i+1, 1, floor.Occupied))
	}
	edits := []floor.Edit{trolley("late", 2_000_000, 2_000_000), paint(50, 50, 60, 60, floor.Unknown)}
	want, err := head(t, s, "hall").Map.Apply(edits)
	must(t, err)
	p := patch(1, edits...) // a base that has left memory
	p.AllowRebase = true
	v, _, err := s.Push(t.Context(), "hall", p)
	if err != nil || v.Version != 7 || v.Base != 1 || v.Digest != want.Digest() {
		t.Errorf("rebased to %+v, %v, want version 7 with digest %x", v, err, want.Digest())
	}
	p = patch(1, trolley("t2", 2_000_000, 2_000_000))
	_, _, err = s.Push(t.Context(), "hall", p)
	if e, ok := errors.AsType[*mapstore.StaleBaseError](err); !ok || len(e.Conflicts) != 1 {
		t.Errorf("an old base without rebasing: %v", err)
	}
}

func TestRequestIDs(t *testing.T) {
	s, disk := memory(t, mapstore.Options{})
	p := patch(1, trolley("t", 1_000_000, 1_000_000))
	p.RequestID = "spill-7"
	first, _, err := s.Push(t.Context(), "hall", p)
	must(t, err)
	push(t, s, "hall", remove("t"))
	r := mapstore.Restore{Version: 2, Base: 3, Author: "a", Reason: "r", RequestID: "back"}
	back, _, err := s.Restore(t.Context(), "hall", r)
	must(t, err)

	check := func(s *mapstore.Store) {
		t.Helper()
		for _, validate := range []bool{false, true} {
			p.ValidateOnly = validate
			if v, repeated, err := s.Push(t.Context(), "hall", p); v != first || !repeated || err != nil {
				t.Errorf("pushed again: %+v, %v, %v", v, repeated, err)
			}
		}
		p.ValidateOnly = false
		if v, repeated, err := s.Restore(t.Context(), "hall", r); v != back || !repeated || err != nil {
			t.Errorf("restored again: %+v, %v, %v", v, repeated, err)
		}
		for name, change := range map[string]func(*mapstore.Patch){
			"base":   func(p *mapstore.Patch) { p.Base++ },
			"author": func(p *mapstore.Patch) { p.Author += "s" },
			"reason": func(p *mapstore.Patch) { p.Reason += "s" },
			"edits":  func(p *mapstore.Patch) { p.Edits = []floor.Edit{trolley("t", 1_000_001, 1_000_000)} },
			"more":   func(p *mapstore.Patch) { p.Edits = append([]floor.Edit{remove("x")}, p.Edits...) },
			"broken": func(p *mapstore.Patch) { p.Edits = []floor.Edit{{Kind: floor.PutFeature}} },
			"id":     func(p *mapstore.Patch) { p.RequestID = "back" },
		} {
			q := p
			change(&q)
			_, _, err := s.Push(t.Context(), "hall", q)
			wantErr(t, "another "+name, err, mapstore.ErrRequestReused)
		}
		other := r
		other.Version = 1
		_, _, err := s.Restore(t.Context(), "hall", other)
		wantErr(t, "another restore", err, mapstore.ErrRequestReused)
		if h := head(t, s, "hall"); h.Info.Version != 4 {
			t.Errorf("head is version %d, want 4", h.Info.Version)
		}
	}
	check(s)
	check(openStore(t, disk.Open(), mapstore.Options{}))
}

// TestSameRequestAtOnce sends one request from many goroutines: one version.
func TestSameRequestAtOnce(t *testing.T) {
	s, _ := memory(t, mapstore.Options{})
	p := patch(1, trolley("t", 1_000_000, 1_000_000))
	p.RequestID = "once"
	var wg sync.WaitGroup
	for range 8 {
		wg.Go(func() {
			if v, _, err := s.Push(t.Context(), "hall", p); err != nil || v.Version != 2 {
				t.Errorf("version %d, %v", v.Version, err)
			}
		})
	}
	wg.Wait()
	if h := head(t, s, "hall"); h.Info.Version != 2 {
		t.Errorf("head is version %d", h.Info.Version)
	}
}

func TestValidateOnlyMakesNothing(t *testing.T) {
	s, disk := memory(t, mapstore.Options{})
	p := patch(1, trolley("t", 1_000_000, 1_000_000))
	p.RequestID, p.ValidateOnly = "try", true
	would, _, err := s.Push(t.Context(), "hall", p)
	must(t, err)
	if n, err := disk.Open().Head(t.Context(), "hall"); n != 1 || err != nil || head(t, s, "hall").Info.Version != 1 {
		t.Errorf("validating made version %d, %v", n, err)
	}
	p.ValidateOnly = false
	is, repeated, err := s.Push(t.Context(), "hall", p)
	must(t, err)
	would.Time = is.Time
	if would != is || repeated {
		t.Errorf("version is %+v, validating said %+v", is, would)
	}
}

func TestRestore(t *testing.T) {
	s, _ := memory(t, mapstore.Options{KeepVersions: 3})
	r := seeded(t)
	for range 9 {
		push(t, s, "hall", randomEdits(r, head(t, s, "hall").Map)...)
	}
	old, err := s.At(t.Context(), "hall", 4)
	must(t, err)
	before := head(t, s, "hall")
	v, _, err := s.Restore(t.Context(), "hall", mapstore.Restore{Version: 4, Base: 10, Author: "a", Reason: "r"})
	must(t, err)
	h := head(t, s, "hall")
	if v.Version != 11 || v.Kind != journal.Restored || v.Restored != 4 || v.Base != 10 || v.Digest != old.Info.Digest || h.Info != v {
		t.Errorf("restored %+v, want the digest of %+v", v, old.Info)
	}
	if c := floor.Diff(old.Map, h.Map); !c.IsEmpty() {
		t.Errorf("restored content differs: %+v", c)
	}
	if c := floor.Diff(before.Map, h.Map); v.Touched != c.Bounds(hall) {
		t.Errorf("touched is %+v, what differs lies in %+v", v.Touched, c.Bounds(hall))
	}
	_, _, err = s.Restore(t.Context(), "hall", mapstore.Restore{Version: 4, Base: 10, Author: "a", Reason: "r"})
	if e, ok := errors.AsType[*mapstore.StaleBaseError](err); !ok || e.Head != v || len(e.Conflicts) == 0 {
		t.Errorf("a stale base: %v", err)
	}
	for base, version := range map[int64]int64{12: 4, 11: 12} {
		_, _, err = s.Restore(t.Context(), "hall", mapstore.Restore{Version: version, Base: base, Author: "a", Reason: "r"})
		wantErr(t, fmt.Sprintf("version %d on base %d", version, base), err, mapstore.ErrFutureVersion)
	}
}

// TestWritersOfOneFloor has many goroutines push with rebasing: each push is one
// version, and none is lost.
func TestWritersOfOneFloor(t *testing.T) {
	s, disk := memory(t, mapstore.Options{})
	const writers, each = 8, 20
	var wg sync.WaitGroup
	for w := range writers {
		wg.Go(func() {
			for i := range each {
				p := patch(1, trolley(fmt.Sprintf("w%d-%d", w, i), 1_000_000, 1_000_000))
				p.AllowRebase = true
				if _, _, err := s.Push(t.Context(), "hall", p); err != nil {
					t.Errorf("writer %d, push %d: %v", w, i, err)
				}
			}
		})
	}
	wg.Wait()
	h := head(t, s, "hall")
	if h.Info.Version != 1+writers*each || h.Map.FeatureCount() != writers*each {
		t.Errorf("head is version %d with %d features", h.Info.Version, h.Map.FeatureCount())
	}
	wantSame(t, "hall", s, openStore(t, disk.Open(), mapstore.Options{}))
}

func TestClosedStore(t *testing.T) {
	s, _ := memory(t, mapstore.Options{})
	h := head(t, s, "hall")
	w, err := s.Watch("hall", 0)
	must(t, err)
	waiting := make(chan error, 2)
	go func() { _, err := s.Await(context.Background(), "hall", 2); waiting <- err }()
	go func() {
		_, err := w.Next(context.Background())
		for err == nil {
			_, err = w.Next(context.Background())
		}
		waiting <- err
	}()
	must(t, s.Close())
	for range 2 {
		wantErr(t, "waiting", <-waiting, mapstore.ErrClosed)
	}
	_, err = s.Head("hall")
	wantErr(t, "Head", err, mapstore.ErrClosed)
	_, err = s.CreateFloor(t.Context(), "dock", hall, "surveyor", "")
	wantErr(t, "CreateFloor", err, mapstore.ErrClosed)
	_, _, err = s.Push(t.Context(), "hall", patch(1, trolley("t", 1_000_000, 1_000_000)))
	wantErr(t, "Push", err, mapstore.ErrClosed)
	_, err = s.Watch("hall", 0)
	wantErr(t, "Watch", err, mapstore.ErrClosed)
	if h.Map.Digest() != h.Info.Digest {
		t.Error("a snapshot that is held does not outlive the store")
	}
	must(t, s.Close())
}
