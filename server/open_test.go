package server

import (
	"bytes"
	"context"
	"encoding/binary"
	"encoding/json"
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/rs/zerolog"
	bolt "go.etcd.io/bbolt"
	"google.golang.org/grpc"
	"google.golang.org/grpc/codes"

	"example.com/wideberth/mapstore"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// lines are the log's lines of one message.
func lines(t *testing.T, log, message string) (out []map[string]any) {
	t.Helper()
	for text := range strings.Lines(log) {
		var line map[string]any
		if err := json.Unmarshal([]byte(text), &line); err != nil {
			t.Fatal(err)
		}
		if line["message"] == message {
			out = append(out, line)
		}
	}
	return out
}

// twoFloors leaves a journal with floor hall at version 3 and floor yard at 1, and
// gives its file.
func twoFloors(t *testing.T) (path string) {
	t.Helper()
	r := start(t)
	r.hall()
	r.push(put(station("gate", 2, 2)))
	if _, err := r.floors.CreateFloor(r.ctx(), edited(create(), func(q *pb.CreateFloorRequest) { q.Floor = "yard" })); err != nil {
		t.Fatal(err)
	}
	r.stop()
	return r.s.cfg.Data
}

// A floor whose records are damaged is not served, and every call for it says why;
// the log says so at the start, and the other floors are served.
func TestDamagedFloorIsRefusedAlone(t *testing.T) {
	path := twoFloors(t)
	db, err := bolt.Open(path, 0o600, nil)
	if err != nil {
		t.Fatal(err)
	}
	err = db.Update(func(tx *bolt.Tx) error {
		b := tx.Bucket([]byte("floors")).Bucket([]byte("hall")).Bucket([]byte("records"))
		key := binary.BigEndian.AppendUint64(nil, 2)
		v := bytes.Clone(b.Get(key))
		v[len(v)/2] ^= 1
		return b.Put(key, v)
	})
	if err = errors.Join(err, db.Close()); err != nil {
		t.Fatal(err)
	}
	r := start(t, func(c *Config) { c.Data = path })

	refused := lines(t, r.log.String(), msgFloorRefused)
	if len(refused) != 1 || refused[0]["level"] != "error" || refused[0]["floor"] != "hall" || !strings.Contains(refused[0]["error"].(string), "version 2, with 1 newer behind it") {
		t.Errorf("the log says %v, wanted hall refused for its version 2", refused)
	}
	notes := lines(t, r.log.String(), msgRecoveryNote)
	if len(notes) != 1 || !strings.Contains(notes[0]["note"].(string), "backup") {
		t.Errorf("notes %v, wanted what to do", notes)
	}
	if opened := lines(t, r.log.String(), msgStoreOpened); len(opened) != 1 || opened[0]["floors"] != 1.0 || opened[0]["refused"] != 1.0 {
		t.Errorf("opened %v, wanted one floor, one refused", opened)
	}

	calls := map[string]func() error{
		"GetFloor": func() error { _, err := r.floors.GetFloor(r.ctx(), &pb.GetFloorRequest{Floor: "hall"}); return err },
		"PushPatch": func() error {
			_, err := r.floors.PushPatch(r.ctx(), push(put(station("x", 1, 1))))
			return err
		},
		"CreateFloor": func() error { _, err := r.floors.CreateFloor(r.ctx(), create()); return err },
		"ListVersions": func() error {
			_, err := r.floors.ListVersions(r.ctx(), &pb.ListVersionsRequest{Floor: "hall"})
			return err
		},
		"Plan":      func() error { _, err := r.routes.Plan(r.ctx(), toBench()); return err },
		"Replan":    func() error { _, err := r.routes.Replan(r.ctx(), replan()); return err },
		"GuideOnce": func() error { _, err := r.guides.GuideOnce(r.ctx(), guideOnce()); return err },
		"WatchVersions": func() error {
			watch, err := r.floors.WatchVersions(r.ctx(), &pb.WatchVersionsRequest{Floor: "hall"})
			if err == nil {
				_, err = watch.Recv()
			}
			return err
		},
		"ReadFloor": func() error {
			read, err := r.floors.ReadFloor(r.ctx(), &pb.ReadFloorRequest{Floor: "hall"})
			if err == nil {
				_, err = read.Recv()
			}
			return err
		},
	}
	for name, call := range calls {
		err := call()
		if wantStatus(t, err, codes.DataLoss, "JOURNAL_DAMAGED"); !strings.Contains(err.Error(), "version 2") || strings.Contains(err.Error(), path) {
			t.Errorf("%s: %v, wanted the version and not the file", name, err)
		}
	}
	if _, err := r.floors.GetFloor(r.ctx(), &pb.GetFloorRequest{Floor: "yard"}); err != nil {
		t.Errorf("yard: %v", err)
	}
	if got, err := r.floors.ListFloors(r.ctx(), &pb.ListFloorsRequest{}); err != nil || len(got.Floors) != 1 || got.Floors[0].Id != "yard" {
		t.Errorf("floors %v, %v; wanted yard alone", got, err)
	}
}

// A journal whose newest commit may be missing is refused with the way out, served
// when that was chosen, and the log says so then.
func TestLostCommit(t *testing.T) {
	path := twoFloors(t)
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	b[os.Getpagesize()+64] ^= 1 // in the second leading page's transaction number
	if err := os.WriteFile(path, b, 0o600); err != nil {
		t.Fatal(err)
	}
	cfg := DefaultConfig()
	cfg.Data = path
	if cfg.AcceptLostCommit {
		t.Error("a lost commit is accepted by default")
	}
	s, err := New(context.Background(), cfg, zerolog.Nop())
	if err == nil {
		t.Fatalf("the damaged file was served (%v)", s.Close())
	}
	for _, want := range []string{path, "newest commit may be missing", "backup", "accept_lost_commit"} {
		if !strings.Contains(err.Error(), want) {
			t.Errorf("%v does not say %q", err, want)
		}
	}
	r := start(t, func(c *Config) { c.Data, c.AcceptLostCommit = path, true })
	if got := lines(t, r.log.String(), msgLostCommit); len(got) != 1 || got[0]["level"] != "error" || got[0]["file"] != path {
		t.Errorf("the log says %v", got)
	}
	if v := r.head().Version; v < 2 {
		t.Errorf("hall is at version %d", v)
	}
	whole := start(t, func(c *Config) { c.Data, c.AcceptLostCommit = filepath.Join(t.TempDir(), "new.db"), true })
	if got := lines(t, whole.log.String(), msgLostCommit); len(got) != 0 {
		t.Errorf("nothing is damaged, and the log says %v", got)
	}
}

// What the store reports fails no call and is in the log.
func TestStoreTroubleIsLogged(t *testing.T) {
	log := &logBuffer{}
	storeTrouble(zerolog.New(log))(errors.New("floor \"hall\": the journal snapshot of version 200 was not written: no space"))
	if got := lines(t, log.String(), msgStoreTrouble); len(got) != 1 || got[0]["level"] != "warn" || !strings.Contains(got[0]["error"].(string), "version 200") {
		t.Errorf("the log says %s", log)
	}
}

// A version that the journal does not take is an error in the log, with its cause,
// which the caller is not told.
func TestJournalFailureIsLoggedWithItsCause(t *testing.T) {
	r := start(t)
	ctx := grpc.NewContextWithServerTransportStream(r.ctx(), headerSink{})
	_, err := r.s.unary(ctx, &pb.GetFloorRequest{Floor: "hall"}, unaryInfo("GetFloor"), func(ctx context.Context, _ any) (any, error) {
		return nil, statusOf(ctx, errors.Join(mapstore.ErrJournal, errors.New("no space left")), subject{})
	})
	if err == nil || strings.Contains(err.Error(), "no space") {
		t.Errorf("the caller is told %v", err)
	}
	got := lines(t, r.log.String(), "call")
	if len(got) != 1 || got[0]["level"] != "error" || !strings.Contains(got[0]["cause"].(string), "no space left") {
		t.Errorf("the log says %v", got)
	}
}
