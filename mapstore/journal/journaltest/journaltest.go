// Package journaltest is what every implementation of journal.Journal must pass.
package journaltest

import (
	"bytes"
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"slices"
	"sync"
	"sync/atomic"
	"testing"

	"example.com/wideberth/mapstore/journal"
)

// Opener opens one journal, the same one each time. The one before has been closed
// then.
type Opener func() (journal.Journal, error)

// Run runs the suite. fresh gives the Opener of an empty journal; what it leaves
// behind is its own to clean up, with t.Cleanup.
func Run(t *testing.T, fresh func(t *testing.T) Opener) {
	for _, c := range []struct {
		name string
		test func(*testing.T, Opener)
	}{
		{"EmptyJournal", emptyJournal},
		{"AppendAndRead", appendAndRead},
		{"ReadPages", readPages},
		{"ReadStopsAtBytes", readStopsAtBytes},
		{"Reopen", reopen},
		{"ConflictWritesNothing", conflictWritesNothing},
		{"UnfitRecords", unfitRecords},
		{"RequestIDs", requestIDs},
		{"FloorsApart", floorsApart},
		{"ManyWriters", manyWriters},
		{"ReadersSeeWholeRecords", readersSeeWholeRecords},
		{"BigPayload", bigPayload},
		{"SnapshotChoice", snapshotChoice},
		{"SnapshotRetention", snapshotRetention},
		{"UnfitSnapshots", unfitSnapshots},
		{"OwnedSlices", ownedSlices},
		{"EndedContext", endedContext},
		{"Closed", closed},
	} {
		t.Run(c.name, func(t *testing.T) { c.test(t, fresh(t)) })
	}
}

// Next is a sealed record that follows prev, with content that depends on floor and
// version alone. The zero prev stands before version 1.
func Next(floor string, prev journal.Record) journal.Record {
	v := prev.Version + 1
	r := journal.Record{
		Floor: floor, Version: v, Kind: journal.Patched, Base: prev.Version,
		Author: "night shift", Reason: fmt.Sprintf("trolley %d moved", v), TimeUs: 1_700_000_000_000_000 + v,
		Payload: fmt.Appendf(nil, "edits of %s %d", floor, v),
		Digest:  sha256.Sum256(fmt.Appendf(nil, "content of %s %d", floor, v)),
		Prev:    prev.Hash,
	}
	if v == 1 {
		r.Kind = journal.Created
	}
	return r.Seal()
}

func start(t *testing.T, open Opener) journal.Journal {
	t.Helper()
	j, err := open()
	if err != nil {
		t.Fatalf("open: %v", err)
	}
	t.Cleanup(func() { j.Close() })
	return j
}

// fill appends n records to an empty floor.
func fill(t *testing.T, j journal.Journal, floor string, n int) []journal.Record {
	t.Helper()
	var recs []journal.Record
	var prev journal.Record
	for range n {
		prev = Next(floor, prev)
		must(t, j.Append(t.Context(), prev))
		recs = append(recs, prev)
	}
	return recs
}

func must(t *testing.T, err error) {
	t.Helper()
	if err != nil {
		t.Fatal(err)
	}
}

func wantErr(t *testing.T, what string, err, want error) {
	t.Helper()
	if !errors.Is(err, want) {
		t.Errorf("%s: error %v, want %v", what, err, want)
	}
}

func wantHead(t *testing.T, j journal.Journal, floor string, want int64) {
	t.Helper()
	got, err := j.Head(t.Context(), floor)
	must(t, err)
	if got != want {
		t.Errorf("head of %s is %d, want %d", floor, got, want)
	}
}

func same(a, b journal.Record) bool {
	return a.Floor == b.Floor && a.Version == b.Version && a.Kind == b.Kind && a.Base == b.Base &&
		a.Author == b.Author && a.Reason == b.Reason && a.RequestID == b.RequestID && a.TimeUs == b.TimeUs &&
		bytes.Equal(a.Payload, b.Payload) && a.Digest == b.Digest && a.Prev == b.Prev && a.Hash == b.Hash
}

// wantAll reads a floor from version 1 on.
func wantAll(t *testing.T, j journal.Journal, floor string, want []journal.Record) {
	t.Helper()
	var got []journal.Record
	must(t, journal.Walk(t.Context(), j, floor, 1, 0, func(r *journal.Record) error {
		got = append(got, *r)
		return nil
	}))
	if !slices.EqualFunc(got, want, same) {
		t.Fatalf("floor %s: read %d records %+v, want %d: %+v", floor, len(got), got, len(want), want)
	}
}

func emptyJournal(t *testing.T, open Opener) {
	j := start(t, open)
	ids, err := j.Floors(t.Context())
	must(t, err)
	if len(ids) != 0 {
		t.Errorf("floors of an empty journal: %q", ids)
	}
	wantHead(t, j, "hall", 0)
	wantAll(t, j, "hall", nil)
	if v, err := j.Find(t.Context(), "hall", "id"); v != 0 || err != nil {
		t.Errorf("find gives %d, %v", v, err)
	}
	if _, ok, err := j.Latest(t.Context(), "hall", 5); ok || err != nil {
		t.Errorf("latest gives %v, %v", ok, err)
	}
}

func appendAndRead(t *testing.T, open Opener) {
	j := start(t, open)
	var prev journal.Record
	var want []journal.Record
	for _, r := range []journal.Record{
		{Floor: "hall", Version: 1, Kind: journal.Created, Author: "a", Payload: []byte("settings")},
		{Floor: "hall", Version: 2, Kind: journal.Patched, Base: 1, Author: "ä\x00\n", Reason: "r", RequestID: "q", TimeUs: -1},
		{Floor: "hall", Version: 3, Kind: journal.Restored, Base: -7, Payload: []byte{0, 255}, Digest: [32]byte{1}},
	} {
		r.Prev = prev.Hash
		prev = r.Seal()
		must(t, j.Append(t.Context(), prev))
		want = append(want, prev)
		wantHead(t, j, "hall", r.Version)
	}
	wantAll(t, j, "hall", want)
}

func readPages(t *testing.T, open Opener) {
	j := start(t, open)
	want := fill(t, j, "hall", 9)
	for from := int64(-1); from <= 11; from++ {
		for limit := -1; limit <= 10; limit++ {
			got, err := j.Read(t.Context(), "hall", from, limit)
			must(t, err)
			lo := min(max(from-1, 0), 9)
			hi := min(lo+int64(max(limit, 0)), 9)
			if !slices.EqualFunc(got, want[lo:hi], same) {
				t.Errorf("read from %d, limit %d: %d records, want versions %d to %d", from, limit, len(got), lo+1, hi)
			}
		}
	}
}

func readStopsAtBytes(t *testing.T, open Opener) {
	j := start(t, open)
	var prev journal.Record
	for range 3 {
		r := Next("hall", prev)
		r.Payload = make([]byte, journal.MaxReadBytes/2+1)
		prev = r.Seal()
		must(t, j.Append(t.Context(), prev))
	}
	got, err := j.Read(t.Context(), "hall", 1, 3)
	must(t, err)
	if len(got) != 1 {
		t.Errorf("a read of more than %d bytes gave %d records, want 1", journal.MaxReadBytes, len(got))
	}
	n := 0
	must(t, journal.Walk(t.Context(), j, "hall", 1, 0, func(*journal.Record) error { n++; return nil }))
	if n != 3 {
		t.Errorf("walk gave %d records, want 3", n)
	}
}

func reopen(t *testing.T, open Opener) {
	j := start(t, open)
	want := fill(t, j, "hall", 5)
	r := Next("hall", want[4])
	r.RequestID = "again"
	want = append(want, r.Seal())
	must(t, j.Append(t.Context(), want[5]))
	snap := journal.Snapshot{Floor: "hall", Version: 4, Digest: want[3].Digest, Content: []byte("content")}
	must(t, j.PutSnapshot(t.Context(), snap))
	must(t, j.Close())

	j = start(t, open)
	wantAll(t, j, "hall", want)
	wantHead(t, j, "hall", 6)
	if v, err := j.Find(t.Context(), "hall", "again"); v != 6 || err != nil {
		t.Errorf("find after reopening gives %d, %v, want 6", v, err)
	}
	s, ok, err := j.Latest(t.Context(), "hall", 6)
	if err != nil || !ok || s.Version != 4 || s.Floor != "hall" || s.Digest != snap.Digest || string(s.Content) != "content" {
		t.Errorf("latest after reopening gives %+v, %v, %v", s, ok, err)
	}
	wantErr(t, "appending an old version after reopening", j.Append(t.Context(), want[5]), journal.ErrConflict)
	must(t, j.Append(t.Context(), Next("hall", want[5])))
}

func conflictWritesNothing(t *testing.T, open Opener) {
	j := start(t, open)
	wantErr(t, "version 2 on an empty floor", j.Append(t.Context(), Next("hall", journal.Record{Version: 1})), journal.ErrConflict)
	ids, err := j.Floors(t.Context())
	must(t, err)
	if len(ids) != 0 {
		t.Errorf("a refused append made floors %q", ids)
	}
	want := fill(t, j, "hall", 3)
	for _, r := range []journal.Record{want[0], want[2], Next("hall", Next("hall", want[2]))} {
		r.RequestID = "refused"
		wantErr(t, fmt.Sprintf("version %d on 3", r.Version), j.Append(t.Context(), r.Seal()), journal.ErrConflict)
	}
	wantAll(t, j, "hall", want)
	if v, err := j.Find(t.Context(), "hall", "refused"); v != 0 || err != nil {
		t.Errorf("a refused append left its request id: %d, %v", v, err)
	}
}

func unfitRecords(t *testing.T, open Opener) {
	j := start(t, open)
	want := fill(t, j, "hall", 2)
	good := Next("hall", want[1])
	for what, change := range map[string]func(*journal.Record){
		"empty floor":       func(r *journal.Record) { r.Floor = "" },
		"unknown kind":      func(r *journal.Record) { r.Kind = 9 },
		"long author":       func(r *journal.Record) { r.Author = string(make([]byte, journal.MaxTextBytes+1)) },
		"large payload":     func(r *journal.Record) { r.Payload = make([]byte, journal.MaxPayloadBytes+1) },
		"other predecessor": func(r *journal.Record) { r.Prev[0] ^= 1 },
	} {
		r := good
		change(&r)
		wantErr(t, what, j.Append(t.Context(), r.Seal()), journal.ErrInvalid)
	}
	unsealed := good
	unsealed.Reason += "!"
	wantErr(t, "not sealed", j.Append(t.Context(), unsealed), journal.ErrInvalid)
	wantAll(t, j, "hall", want)
	must(t, j.Append(t.Context(), good))
}

func requestIDs(t *testing.T, open Opener) {
	j := start(t, open)
	first := fill(t, j, "hall", 1)[0]
	r := Next("hall", first)
	r.RequestID = "spill-7"
	r = r.Seal()
	must(t, j.Append(t.Context(), r))
	for id, want := range map[string]int64{"spill-7": 2, "spill-8": 0, "spill": 0, "": 0} {
		if v, err := j.Find(t.Context(), "hall", id); v != want || err != nil {
			t.Errorf("find %q gives %d, %v, want %d", id, v, err, want)
		}
	}
	if v, err := j.Find(t.Context(), "dock", "spill-7"); v != 0 || err != nil {
		t.Errorf("another floor knows the request id: %d, %v", v, err)
	}
	again := Next("hall", r)
	again.RequestID = "spill-7"
	wantErr(t, "a used request id", j.Append(t.Context(), again.Seal()), journal.ErrInvalid)
	wantHead(t, j, "hall", 2)
}

func floorsApart(t *testing.T, open Opener) {
	j := start(t, open)
	want := map[string][]journal.Record{}
	for i, floor := range []string{"hall", "dock", "hall-2"} {
		want[floor] = fill(t, j, floor, i+1)
	}
	ids, err := j.Floors(t.Context())
	must(t, err)
	if !slices.Equal(ids, []string{"dock", "hall", "hall-2"}) {
		t.Errorf("floors are %q", ids)
	}
	for floor, recs := range want {
		wantAll(t, j, floor, recs)
	}
}

// manyWriters has several goroutines make versions of one floor, each on top of what
// it read; every version must be made exactly once.
func manyWriters(t *testing.T, open Opener) {
	const writers, each = 4, 12
	j := start(t, open)
	first := fill(t, j, "hall", 1)[0]
	var conflicts atomic.Int64
	var wg sync.WaitGroup
	for w := range writers {
		wg.Go(func() {
			head := first
			for i := 0; i < each; {
				r := Next("hall", head)
				r.RequestID = fmt.Sprintf("%d/%d", w, i)
				r = r.Seal()
				switch err := j.Append(t.Context(), r); {
				case err == nil:
					head = r
					i++
				case errors.Is(err, journal.ErrConflict):
					conflicts.Add(1)
					if err := journal.Walk(t.Context(), j, "hall", head.Version+1, 0, func(r *journal.Record) error {
						head = *r
						return nil
					}); err != nil {
						t.Errorf("catching up: %v", err)
						return
					}
				default:
					t.Errorf("append: %v", err)
					return
				}
			}
		})
	}
	wg.Wait()
	wantHead(t, j, "hall", 1+writers*each)
	if good, err := journal.Verify(t.Context(), j, "hall"); good != 1+writers*each || err != nil {
		t.Errorf("verify gives %d, %v", good, err)
	}
	for w := range writers {
		for i := range each {
			if v, err := j.Find(t.Context(), "hall", fmt.Sprintf("%d/%d", w, i)); v == 0 || err != nil {
				t.Errorf("writer %d's record %d is at version %d, %v", w, i, v, err)
			}
		}
	}
	t.Logf("%d appends, %d conflicts", writers*each, conflicts.Load())
}

// readersSeeWholeRecords reads while a writer appends: the head that a reader was
// told of can be read, whole and chained.
func readersSeeWholeRecords(t *testing.T, open Opener) {
	j := start(t, open)
	done := make(chan struct{})
	var wg sync.WaitGroup
	for range 3 {
		wg.Go(func() {
			for stop := false; !stop; {
				select {
				case <-done:
					stop = true // after one more look
				default:
				}
				head, err := j.Head(t.Context(), "hall")
				if err != nil {
					t.Errorf("head: %v", err)
					return
				}
				if head == 0 {
					continue
				}
				chain := journal.Chain{Floor: "hall"}
				if err := journal.Walk(t.Context(), j, "hall", 1, head, chain.Next); err != nil || chain.Version != head {
					t.Errorf("walk to head %d came to %d: %v", head, chain.Version, err)
					return
				}
			}
		})
	}
	fill(t, j, "hall", 40)
	close(done)
	wg.Wait()
}

func bigPayload(t *testing.T, open Opener) {
	j := start(t, open)
	r := Next("hall", journal.Record{})
	r.Payload = make([]byte, 8<<20)
	for i := range r.Payload {
		r.Payload[i] = byte(i * i >> 7)
	}
	r = r.Seal()
	must(t, j.Append(t.Context(), r))
	must(t, j.PutSnapshot(t.Context(), journal.Snapshot{Floor: "hall", Version: 1, Digest: r.Digest, Content: r.Payload}))
	must(t, j.Close())
	j = start(t, open)
	wantAll(t, j, "hall", []journal.Record{r})
	s, ok, err := j.Latest(t.Context(), "hall", 1)
	if err != nil || !ok || !bytes.Equal(s.Content, r.Payload) {
		t.Errorf("the snapshot's %d bytes came back as %d, %v, %v", len(r.Payload), len(s.Content), ok, err)
	}
}

func put(t *testing.T, j journal.Journal, r journal.Record) {
	t.Helper()
	must(t, j.PutSnapshot(t.Context(), journal.Snapshot{
		Floor: r.Floor, Version: r.Version, Digest: r.Digest, Content: fmt.Append(nil, r.Version)}))
}

func snapshotChoice(t *testing.T, open Opener) {
	j := start(t, open)
	recs := fill(t, j, "hall", 20)
	for _, v := range []int{12, 4, 8} {
		put(t, j, recs[v-1])
	}
	put(t, j, recs[8-1]) // again
	for at, want := range map[int64]int64{-1: 0, 0: 0, 3: 0, 4: 4, 5: 4, 8: 8, 11: 8, 12: 12, 20: 12, 1 << 40: 12} {
		s, ok, err := j.Latest(t.Context(), "hall", at)
		must(t, err)
		if ok != (want > 0) || s.Version != want || ok && string(s.Content) != fmt.Sprint(want) {
			t.Errorf("latest at %d is version %d, %v, want %d", at, s.Version, ok, want)
		}
	}
}

func snapshotRetention(t *testing.T, open Opener) {
	const every, n = 2, 80
	j := start(t, open)
	recs := fill(t, j, "hall", n)
	for v := every; v <= n; v += every {
		put(t, j, recs[v-1])
	}
	var held []int64
	for at := int64(n); ; {
		s, ok, err := j.Latest(t.Context(), "hall", at)
		must(t, err)
		if !ok {
			break
		}
		held = append(held, s.Version)
		at = s.Version - 1
	}
	if len(held) == 0 || len(held) > journal.KeepSnapshots {
		t.Fatalf("%d snapshots are held, want 1 to %d: %v", len(held), journal.KeepSnapshots, held)
	}
	if held[0] != n || held[1] != n-every {
		t.Errorf("the newest snapshots are not held: %v", held)
	}
	wantAll(t, j, "hall", recs) // records are all kept
}

func unfitSnapshots(t *testing.T, open Opener) {
	j := start(t, open)
	recs := fill(t, j, "hall", 2)
	for what, s := range map[string]journal.Snapshot{
		"version 0":       {Floor: "hall"},
		"above the head":  {Floor: "hall", Version: 3},
		"unknown floor":   {Floor: "dock", Version: 1},
		"no floor":        {Version: 1},
		"another content": {Floor: "hall", Version: 2, Digest: recs[0].Digest},
	} {
		wantErr(t, what, j.PutSnapshot(t.Context(), s), journal.ErrInvalid)
	}
	if _, ok, err := j.Latest(t.Context(), "hall", 9); ok || err != nil {
		t.Errorf("a refused snapshot is held: %v, %v", ok, err)
	}
}

// ownedSlices writes into what was passed in and what was given.
func ownedSlices(t *testing.T, open Opener) {
	j := start(t, open)
	r := Next("hall", journal.Record{})
	want := r
	want.Payload = slices.Clone(r.Payload)
	must(t, j.Append(t.Context(), r))
	s := journal.Snapshot{Floor: "hall", Version: 1, Digest: r.Digest, Content: []byte("content")}
	must(t, j.PutSnapshot(t.Context(), s))
	clear(r.Payload)
	clear(s.Content)
	for range 2 {
		got, err := j.Read(t.Context(), "hall", 1, 1)
		must(t, err)
		if len(got) != 1 || !same(got[0], want) {
			t.Fatalf("read %+v, want %+v", got, want)
		}
		clear(got[0].Payload)
		s, _, err := j.Latest(t.Context(), "hall", 1)
		must(t, err)
		if string(s.Content) != "content" {
			t.Fatalf("snapshot content is %q", s.Content)
		}
		clear(s.Content)
	}
}

func endedContext(t *testing.T, open Opener) {
	j := start(t, open)
	recs := fill(t, j, "hall", 1)
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	each(ctx, j, recs[0], func(what string, err error) { wantErr(t, what, err, context.Canceled) })
	wantAll(t, j, "hall", recs)
}

func closed(t *testing.T, open Opener) {
	j := start(t, open)
	recs := fill(t, j, "hall", 1)
	must(t, j.Close())
	each(t.Context(), j, recs[0], func(what string, err error) { wantErr(t, what, err, journal.ErrClosed) })
	if err := j.Close(); err != nil {
		t.Errorf("closing twice: %v", err)
	}
	wantAll(t, start(t, open), "hall", recs)
}

// each calls every method on a floor whose only record is r.
func each(ctx context.Context, j journal.Journal, r journal.Record, check func(what string, err error)) {
	_, err := j.Floors(ctx)
	check("Floors", err)
	_, err = j.Head(ctx, r.Floor)
	check("Head", err)
	_, err = j.Read(ctx, r.Floor, 1, 1)
	check("Read", err)
	_, _, err = j.Latest(ctx, r.Floor, 1)
	check("Latest", err)
	_, err = j.Find(ctx, r.Floor, "id")
	check("Find", err)
	check("Append", j.Append(ctx, Next(r.Floor, r)))
	check("PutSnapshot", j.PutSnapshot(ctx, journal.Snapshot{Floor: r.Floor, Version: 1, Digest: r.Digest}))
}
