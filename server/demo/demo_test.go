package demo

import (
	"bytes"
	"context"
	"encoding/xml"
	"errors"
	"io"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"go.uber.org/goleak"
	"google.golang.org/protobuf/testing/protocmp"

	"example.com/wideberth/client"
	"example.com/wideberth/mapstore/floor"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
	"example.com/wideberth/testdata"
)

func TestMain(m *testing.M) { goleak.VerifyTestMain(m) }

// screen is what the demonstration prints, readable while it goes on.
type screen struct {
	mu   sync.Mutex
	text bytes.Buffer
}

func (s *screen) Write(p []byte) (int, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.text.Write(p)
}

func (s *screen) String() string {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.text.String()
}

// TestNightShift plays the demonstration once, staying, and holds it to its story.
func TestNightShift(t *testing.T) {
	ctx, cancel := context.WithCancel(t.Context())
	defer cancel()
	var told screen
	var happened facts
	out := filepath.Join(t.TempDir(), "pictures")
	ended := make(chan error, 1)
	lis, err := listen(ctx, false) // not on the daemon's own port, which may be in use
	if err != nil {
		t.Fatal(err)
	}
	go func() {
		var err error
		happened, err = play(ctx, Options{Out: out, Stay: true}, lis, &told)
		ended <- err
	}()
	reachable := regexp.MustCompile(`Still serving on (\S+)`)
	for !reachable.MatchString(told.String()) {
		select {
		case err := <-ended:
			t.Fatalf("ended before it stayed: %v\n%s", err, told.String())
		case <-time.After(20 * time.Millisecond):
		}
	}
	checkReached(ctx, t, reachable.FindStringSubmatch(told.String())[1])
	cancel()
	if err := <-ended; err != nil {
		t.Fatalf("staying ended with %v, want nil", err)
	}
	text := told.String()
	t.Log(text)

	checkVersions(t, happened)
	checkReplan(t, happened)
	checkGuidance(t, happened)
	checkColdRoom(t, happened)
	checkPictures(t, out, happened)
	for _, want := range []string{"not a safety function", "People and loose loads are not on the map", "because the change cuts the old one", "0.90 m"} {
		if !strings.Contains(text, want) {
			t.Errorf("does not say %q", want)
		}
	}
}

// checkReached reads the hall back from the service that stays: what the
// description says is what the floor holds.
func checkReached(ctx context.Context, t *testing.T, address string) {
	c, err := client.Dial(address)
	if err != nil {
		t.Error(err)
		return
	}
	defer c.Close()
	l, err := testdata.Hall()
	if err != nil {
		t.Error(err)
		return
	}
	got, err := c.ReadFloor(ctx, l.Floor, client.Pinned(2))
	if err != nil {
		t.Error(err)
		return
	}
	var want []*wideberthv1.Feature
	trolleys := 0
	for _, e := range l.Edits {
		if f := e.GetPutFeature().GetFeature(); f != nil {
			want = append(want, f)
		}
		if r := e.GetPaintOccupancy().GetRect(); r.GetOccupancy() == wideberthv1.Occupancy_OCCUPANCY_OCCUPIED {
			trolleys += int(r.Rect.Columns * r.Rect.Rows) // none lies on another
		}
	}
	slices.SortFunc(want, func(a, b *wideberthv1.Feature) int { return strings.Compare(a.GetName(), b.GetName()) })
	if d := cmp.Diff(want, got.Features, protocmp.Transform()); d != "" {
		t.Errorf("features (-described +held):\n%s", d)
	}
	occupied := 0
	for row := range int(got.Settings.GetRows()) {
		for col := range int(got.Settings.GetColumns()) {
			if got.At(col, row) == floor.Occupied {
				occupied++
			}
		}
	}
	if occupied != trolleys {
		t.Errorf("%d cells are occupied, the description paints %d", occupied, trolleys)
	}
}

func checkVersions(t *testing.T, f facts) {
	if !slices.Equal(f.Versions, []int64{2, 3}) {
		t.Errorf("the watch named versions %v, want 2 and 3", f.Versions)
	}
	if b, a := f.Before.GetCheckedAgainst(), f.After.GetCheckedAgainst(); b.GetVersion() != 2 || a.GetVersion() != 3 || b.GetDigest() == a.GetDigest() {
		t.Errorf("routes were checked against %v and %v", b, a)
	}
}

func checkReplan(t *testing.T, f facts) {
	if f.Replan.GetResult() != wideberthv1.ReplanResult_REPLAN_RESULT_NEW || f.Replan.GetCause() != wideberthv1.ReplanCause_REPLAN_CAUSE_CUT {
		t.Errorf("replan: %v, %v; want new, because the old one was cut", f.Replan.GetResult(), f.Replan.GetCause())
	}
	// The parked row lies 26 to 31 m along; the tug is stopped short of it.
	if s := f.Replan.GetCutSM(); s <= drivenBeforeM || s >= f.Before.GetLengthM() {
		t.Errorf("the old route is cut at %v m of %v m, driven %v m", s, f.Before.GetLengthM(), drivenBeforeM)
	}
	if rest := f.Before.GetLengthM() - drivenBeforeM; f.After.GetLengthM() <= rest {
		t.Errorf("the new route is %v m, no longer than the %v m that were left: the change cost nothing", f.After.GetLengthM(), rest)
	}
	for name, r := range map[string]*wideberthv1.Route{"before": f.Before, "after": f.After} {
		if need := r.GetBody().GetRadiusM() + r.GetBody().GetMarginM(); r.GetSmallestClearanceM() < need {
			t.Errorf("%s: smallest clearance %v m, below the required %v m", name, r.GetSmallestClearanceM(), need)
		}
	}
	// Both end through the door of 1.60 m, half of which is 0.80 m.
	if c := f.After.GetSmallestClearanceM(); c > 0.80 {
		t.Errorf("smallest clearance %v m on a way through a door of 1.60 m", c)
	}
}

func checkGuidance(t *testing.T, f facts) {
	if f.StaleAdvice != wideberthv1.GuideState_GUIDE_STATE_REPLAN_ADVISED {
		t.Errorf("on the old route after the change: %v, want replan advised", f.StaleAdvice)
	}
	hinting := 0
	for _, h := range f.Hints {
		if h.GetState() == wideberthv1.GuideState_GUIDE_STATE_HINTING {
			hinting++
		}
		if h.GetStamp().GetVersion() != 3 || h.GetValidForS() <= 0 || h.GetSpeedCeilingMps() > f.After.GetBody().GetMaxSpeedMps() {
			t.Errorf("hint %v", h)
		}
	}
	if hinting == 0 {
		t.Errorf("none of %d hints in the tight legs says hinting", len(f.Hints))
	}
}

func checkColdRoom(t *testing.T, f facts) {
	if c := f.Runner.GetSmallestClearanceM(); c > 0.45 || c < 0.38 {
		t.Errorf("the runner's smallest clearance is %v m; through a door of 0.90 m it is at most 0.45 m, and it needs 0.38 m", c)
	}
	b := f.Refused.GetBottleneck()
	if f.Refused.GetReason() != wideberthv1.RefusalReason_REFUSAL_REASON_NO_PASSAGE || !b.GetExists() {
		t.Fatalf("refusal %v", f.Refused)
	}
	if w := b.GetWidthM(); w > 0.90 || w < 0.90-b.GetWidthShortM() || w < 0.895 {
		t.Errorf("the door is %v m wide, said to be short by at most %v m; it is 0.90 m", w, b.GetWidthShortM())
	}
	if b.GetWidthNeededM() != 1.30 {
		t.Errorf("the tug needs %v m, want 1.30", b.GetWidthNeededM())
	}
	names := slices.Sorted(slices.Values(b.GetFeatures()))
	if !slices.Equal(names, []string{"cold-1/door-east", "cold-1/door-west"}) {
		t.Errorf("the bottleneck is between %v", b.GetFeatures())
	}
}

func checkPictures(t *testing.T, out string, f facts) {
	var want []string
	for _, name := range []string{"before.svg", "after.svg", "refused.svg"} {
		want = append(want, filepath.Join(out, name))
	}
	if !slices.Equal(f.Pictures, want) {
		t.Fatalf("pictures %v, want %v", f.Pictures, want)
	}
	for _, path := range want {
		b, err := os.ReadFile(path)
		if err != nil {
			t.Error(err)
			continue
		}
		for dec := xml.NewDecoder(bytes.NewReader(b)); ; {
			if _, err := dec.Token(); errors.Is(err, io.EOF) {
				break
			} else if err != nil {
				t.Errorf("%s: %v", path, err)
				break
			}
		}
	}
}

// A folder that cannot be made is an error before anything is started.
func TestFolderThatCannotBe(t *testing.T) {
	file := filepath.Join(t.TempDir(), "file")
	if err := os.WriteFile(file, nil, 0o600); err != nil {
		t.Fatal(err)
	}
	var told screen
	if err := Run(t.Context(), Options{Out: filepath.Join(file, "sub")}, &told); err == nil || told.String() != "" {
		t.Errorf("error %v after printing %q", err, told.String())
	}
}
