package server

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"unicode/utf8"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/mapstore/geom"
	pb "example.com/wideberth/proto/wideberth/v1"
)

// Every message of the contract that a client sends is checked here and in the
// validate_*.go files beside it, before a handler sees it: the interceptors look
// the message up in validators and refuse it with all its faults at once. What
// can only be judged with a floor's settings (is the pose on the floor, does the
// clearance fit under its cap) is judged by the handlers with the same faults
// list. A fault reads "field path: value, wanted range", in the contract's names.

// Bounds on what is accepted, from the contract's comments.
const (
	maxNameLength     = floor.MaxNameBytes // floor ids, feature names; characters of a body's name
	maxAuthorLength   = 100                // characters
	maxReasonLength   = 500                // characters
	maxRequestID      = 64                 // characters of printable ASCII
	maxRoutePoints    = 100_000            // of a route that is handed back
	maxRouteLegs      = 10_000             // of a route that is handed back
	maxWaitS          = 10.0               // VersionSelector.max_wait_s
	defaultPageSize   = 100                // asked for by 0
	maxPageSize       = 1000               // more is coerced
	maxPageTokenBytes = 512                // ours are shorter
	digestLength      = 64                 // SHA-256 in hex

	// maxCapM is the largest clearance cap that any floor can have, in metres.
	maxCapM = floor.MaxCapCells * floor.MaxResolutionUm / geom.UmPerMetre
	// maxCoordinateM is how far from the frame's origin a place can be, in metres: the
	// farthest corner of the farthest floor, rounded up.
	maxCoordinateM = floor.MaxOriginUm/geom.UmPerMetre + 1_000_000

	// maxFeatureBytes bounds one feature on the wire, so that ReadFloor, whose
	// messages have at most 1 MiB, can send it back whole.
	maxFeatureBytes = maxReadBytes - 4<<10
	// headingSlack is how far a heading may lie beyond +-pi before it is refused:
	// float32 holds pi 8.8e-8 too large, and atan2 may give -pi. Such a heading is
	// taken as the one it is closest to within (-pi, pi].
	headingSlack = 1e-6
)

// validators has the check of every message that a client may send, by full name.
// A message that is not listed is refused, and a test walks the contract's
// descriptors to see that none is missing.
var validators = map[string]func(proto.Message, *faults){}

func init() {
	register(checkCreateFloor)
	register(checkGetFloor)
	register(checkListFloors)
	register(checkPushPatch)
	register(checkListVersions)
	register(checkGetVersion)
	register(checkCompareVersions)
	register(checkRestoreVersion)
	register(checkReadFloor)
	register(checkWatchVersions)
	register(checkShowRoadmap)
	register(checkCompareRoadmaps)
	register(checkShowGrownSolids)
	register(checkPlan)
	register(checkReplan)
	register(checkPlanMany)
	register(checkGuide)
	register(checkGuideOnce)
}

func register[T proto.Message](check func(T, *faults)) {
	var zero T
	validators[string(zero.ProtoReflect().Descriptor().FullName())] = func(m proto.Message, f *faults) { check(m.(T), f) }
}

// validate checks one message. The error is an *inputError with every fault, or
// errUnchecked when nothing knows how to check it.
func validate(m proto.Message) error {
	check, ok := validators[string(m.ProtoReflect().Descriptor().FullName())]
	if !ok {
		return fmt.Errorf("%w: %s", errUnchecked, m.ProtoReflect().Descriptor().FullName())
	}
	var f faults
	check(m, &f)
	return f.err()
}

// field is the path of a field, built from the outside in and only turned into
// text when there is a fault to name.
type field struct {
	parent *field
	name   string
	index  int // of the item, when name is ""
}

// at is a field's path inside p.
func (p *field) at(name string) *field { return &field{parent: p, name: name} }

// item is an item's path inside p.
func (p *field) item(i int) *field { return &field{parent: p, index: i} }

// String is the path in the contract's names: patch.edits[3].clear_rect.area.
func (p *field) String() string {
	if p == nil {
		return ""
	}
	var b strings.Builder
	p.write(&b)
	return b.String()
}

func (p *field) write(b *strings.Builder) {
	if p.parent != nil {
		p.parent.write(b)
	}
	if p.name == "" {
		b.WriteByte('[')
		b.WriteString(strconv.Itoa(p.index))
		b.WriteByte(']')
		return
	}
	if b.Len() > 0 {
		b.WriteByte('.')
	}
	b.WriteString(p.name)
}

// fault is one thing wrong with a request.
type fault struct{ path, problem string }

// faults collects what is wrong with a request: the first maxFaults with their
// words, the others as a count. The zero value is ready for use.
type faults struct {
	list []fault
	more int
}

// add notes a fault. The format should give the value and the wanted range.
func (f *faults) add(p *field, format string, args ...any) {
	if len(f.list) == maxFaults {
		f.more++
		return
	}
	f.list = append(f.list, fault{p.String(), fmt.Sprintf(format, args...)})
}

// any says whether there is a fault.
func (f *faults) any() bool { return len(f.list) > 0 }

// err is nil without faults, else an *inputError.
func (f *faults) err() error {
	if !f.any() {
		return nil
	}
	return &inputError{list: f.list, more: f.more}
}

// number faults v when it is not finite or not within [lo, hi]; it says whether v
// is fine.
func (f *faults) number(p *field, v, lo, hi float64) bool {
	if v >= lo && v <= hi {
		return true
	}
	f.add(p, "%v, wanted %v to %v", v, lo, hi)
	return false
}

// finite faults NaN and infinities.
func (f *faults) finite(p *field, v float64) bool {
	if !math.IsNaN(v) && !math.IsInf(v, 0) {
		return true
	}
	f.add(p, "%v, wanted a finite number", v)
	return false
}

// coordinate faults a place that no floor can have.
func (f *faults) coordinate(p *field, v float64) bool {
	if v >= -maxCoordinateM && v <= maxCoordinateM {
		return true
	}
	f.add(p, "%v, wanted a finite number from %d to %d", v, -maxCoordinateM, maxCoordinateM)
	return false
}

// heading faults a direction outside (-pi, pi], give or take headingSlack.
func (f *faults) heading(p *field, v float64) bool {
	if math.Abs(v) <= math.Pi+headingSlack {
		return true
	}
	f.add(p, "%v, wanted above -pi, at most pi", v)
	return false
}

// text faults a string whose length in characters is not within [lo, hi].
func (f *faults) text(p *field, v string, lo, hi int) bool {
	n := utf8.RuneCountInString(v)
	if n >= lo && n <= hi {
		return true
	}
	if n == 0 {
		f.add(p, "empty, wanted %d to %d characters", lo, hi)
	} else {
		f.add(p, "%d characters, wanted %d to %d", n, lo, hi)
	}
	return false
}

// floorID faults what cannot be a floor's id.
func (f *faults) floorID(p *field, v string) bool {
	ok := v != "" && len(v) <= maxNameLength && v[0] >= 'a' && v[0] <= 'z'
	for i := 0; ok && i < len(v); i++ {
		c := v[i]
		ok = c >= 'a' && c <= 'z' || c >= '0' && c <= '9' || c == '-'
	}
	if !ok {
		f.add(p, "%s, wanted 1 to %d of a-z, 0-9, '-', first a letter", quote(v), maxNameLength)
	}
	return ok
}

// featureName faults what cannot be a feature's name.
func (f *faults) featureName(p *field, v string) bool {
	ok := v != "" && len(v) <= maxNameLength
	for i := 0; ok && i < len(v); i++ {
		c := v[i]
		alnum := c >= 'a' && c <= 'z' || c >= '0' && c <= '9'
		ok = alnum || i > 0 && (c == '-' || c == '_' || c == '.' || c == '/')
	}
	if !ok {
		f.add(p, "%s, wanted 1 to %d of a-z, 0-9, '-', '_', '.', '/', first a letter or digit", quote(v), maxNameLength)
	}
	return ok
}

// requestID faults an id that is too long or not printable ASCII. Empty is fine.
func (f *faults) requestID(p *field, v string) {
	if len(v) > maxRequestID {
		f.add(p, "%d bytes, wanted at most %d", len(v), maxRequestID)
		return
	}
	if !printable(v) {
		f.add(p, "%s, wanted printable ASCII", quote(v))
	}
}

func printable(v string) bool {
	for i := 0; i < len(v); i++ {
		if v[i] < 0x20 || v[i] > 0x7e {
			return false
		}
	}
	return true
}

// version faults a version number below lo.
func (f *faults) version(p *field, v, lo int64) bool {
	if v >= lo {
		return true
	}
	f.add(p, "%d, wanted %d or more", v, lo)
	return false
}

// missing faults an absent REQUIRED field.
func (f *faults) missing(p *field) { f.add(p, "not set, wanted a value") }

// page faults a negative page size and a token that is too long to be ours.
func (f *faults) page(size int32, token string) {
	if size < 0 {
		f.add(root.at("page_size"), "%d, wanted 0 to %d", size, maxPageSize)
	}
	if len(token) > maxPageTokenBytes {
		f.add(root.at("page_token"), "%d bytes, wanted the next_page_token of an answer", len(token))
	}
}

// enum faults a number that the contract does not name; the zero value is fine
// when it has a meaning there.
func enum[E interface {
	~int32
	String() string
}](f *faults, p *field, v E, names map[int32]string, zeroIsFine bool) bool {
	if _, ok := names[int32(v)]; ok && (v != 0 || zeroIsFine) {
		return true
	}
	lo := 1
	if zeroIsFine {
		lo = 0
	}
	f.add(p, "%s, wanted one of the values %d to %d", v, lo, len(names)-1)
	return false
}

// selector checks which version a request is about.
func (f *faults) selector(p *field, s *pb.VersionSelector) {
	if s == nil {
		return
	}
	switch c := s.Choice.(type) {
	case *pb.VersionSelector_Pinned:
		f.version(p.at("pinned"), c.Pinned, 1)
	case *pb.VersionSelector_AtLeast:
		f.version(p.at("at_least"), c.AtLeast, 1)
	}
	f.number(p.at("max_wait_s"), s.MaxWaitS, 0, maxWaitS)
}

// pose checks a REQUIRED pose.
func (f *faults) pose(p *field, v *pb.Pose) {
	if v == nil {
		f.missing(p)
		return
	}
	f.coordinate(p.at("x_m"), v.XM)
	f.coordinate(p.at("y_m"), v.YM)
	f.heading(p.at("heading_rad"), v.HeadingRad)
}

// area checks a rectangle in metres.
func (f *faults) area(p *field, a *pb.Area) bool {
	ok := f.coordinate(p.at("min_x_m"), a.MinXM)
	ok = f.coordinate(p.at("min_y_m"), a.MinYM) && ok
	ok = f.coordinate(p.at("max_x_m"), a.MaxXM) && ok
	ok = f.coordinate(p.at("max_y_m"), a.MaxYM) && ok
	if ok && a.MaxXM < a.MinXM {
		f.add(p.at("max_x_m"), "%v, wanted %v (min_x_m) or more", a.MaxXM, a.MinXM)
		ok = false
	}
	if ok && a.MaxYM < a.MinYM {
		f.add(p.at("max_y_m"), "%v, wanted %v (min_y_m) or more", a.MaxYM, a.MinYM)
		ok = false
	}
	return ok
}

// root is the path of the message itself.
var root *field

// quote is a value as it stands in a fault: quoted, and cut when it is long.
func quote(v string) string {
	const longest = 80
	if len(v) > longest {
		return strconv.Quote(cut(v, longest)) + "..."
	}
	return strconv.Quote(v)
}

// cut shortens v to at most n bytes, between characters.
func cut(v string, n int) string {
	if len(v) <= n {
		return v
	}
	for n > 0 && !utf8.RuneStart(v[n]) {
		n--
	}
	return v[:n]
}
