package client

import (
	"encoding/hex"
	"fmt"

	"example.com/wideberth/mapstore/floor"
	"example.com/wideberth/proto/wire"
)

// Map makes the content into the map that the service itself keeps, so that a tool
// can measure clearances and plan on it without the network. It fails when
// the map's digest is not the stamp's: then it is not the same map, and nothing
// worked out on it holds for the service's version.
func (f *FloorContent) Map() (*floor.Map, error) {
	set := wire.SettingsIn(f.Settings)
	m, err := floor.New(set)
	if err != nil {
		return nil, fmt.Errorf("client: floor content: settings: %w", err)
	}
	edits := make([]floor.Edit, 0, len(f.Features)+1)
	edits = append(edits, floor.Edit{Kind: floor.PaintCells, Rect: set.AllCells(), Cells: f.Cells})
	for i, feature := range f.Features {
		t, err := wire.FeatureIn(feature)
		if err != nil {
			return nil, fmt.Errorf("client: floor content: features[%d] %q: %w", i, feature.GetName(), err)
		}
		edits = append(edits, floor.Edit{Kind: floor.PutFeature, Feature: t})
	}
	if m, err = m.Apply(edits); err != nil {
		return nil, fmt.Errorf("client: floor content: %w", err)
	}
	digest := m.Digest()
	if got := hex.EncodeToString(digest[:]); got != f.Stamp.GetDigest() {
		return nil, fmt.Errorf("client: floor content: digest is %s, the service says %q for version %d", got, f.Stamp.GetDigest(), f.Stamp.GetVersion())
	}
	return m, nil
}
