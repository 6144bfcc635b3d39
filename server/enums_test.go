package server

import (
	"testing"

	"google.golang.org/protobuf/reflect/protoreflect"
)

// Every value of the contract's that the server may answer with or be asked for has
// its twin: one that was added and forgotten would be sent as "not said".
func TestEveryEnumHasItsTwins(t *testing.T) {
	wantTwins(t, versionKinds, 1)
	wantTwins(t, preferences, 1)
	wantTwins(t, roadmaps, 0)
	wantTwins(t, speedCauses, 1)
	wantTwins(t, boundKinds, 1)
	wantTwins(t, refusalReasons, 1)
	wantTwins(t, replanCauses, 1)
	wantTwins(t, guideStates, 1)
}

// wantTwins wants a twin for each of the contract's numbers from first on.
func wantTwins[O comparable, W interface {
	comparable
	protoreflect.Enum
}](t *testing.T, pairs twins[O, W], first protoreflect.EnumNumber) {
	t.Helper()
	var zero W
	values := zero.Descriptor().Values()
	for i := range values.Len() {
		v := values.Get(i)
		if v.Number() < first {
			continue
		}
		w := zero.Type().New(v.Number()).(W)
		if got := pairs.out(pairs.in(w)); got != w {
			t.Errorf("%s goes in as %v and out as %v", v.FullName(), pairs.in(w), got)
		}
	}
	if want := values.Len() - int(first); len(pairs) != want {
		t.Errorf("%s: %d twins, wanted %d", zero.Descriptor().FullName(), len(pairs), want)
	}
}
