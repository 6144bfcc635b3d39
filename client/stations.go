package client

import (
	"context"
	"io"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// Stations reads the stations of one version, by name, and which version that is,
// without its cells. A nil selector asks for the head. A stream that breaks is read
// again as ReadFloor's is; an incomplete one is an error with code DATA_LOSS.
func (c *Client) Stations(ctx context.Context, floor string, version *wideberthv1.VersionSelector) (*wideberthv1.VersionStamp, []*wideberthv1.Feature, error) {
	if _, ok := ctx.Deadline(); !ok {
		var cancel context.CancelFunc
		ctx, cancel = context.WithTimeout(ctx, c.cfg.timeouts.Content)
		defer cancel()
	}
	var stamp *wideberthv1.VersionStamp
	var stations []*wideberthv1.Feature
	err := c.again(ctx, "Stations", func() error {
		ctx, cancel := context.WithCancel(ctx)
		defer cancel()
		stream, err := c.floors.ReadFloor(ctx, &wideberthv1.ReadFloorRequest{Floor: floor, Version: version, SkipOccupancy: true})
		if err != nil {
			return err
		}
		stamp, stations, err = stationsOf(stream.Recv)
		return err
	})
	if err != nil {
		return nil, nil, err
	}
	return stamp, stations, nil
}

// stationsOf picks the stations from a ReadFloor stream without cells.
func stationsOf(next func() (*wideberthv1.ReadFloorResponse, error)) (stamp *wideberthv1.VersionStamp, stations []*wideberthv1.Feature, err error) {
	received := int64(0)
	for {
		msg, err := next()
		if err == io.EOF {
			return nil, nil, lost("the stream ended without its end mark")
		}
		if err != nil {
			return nil, nil, err
		}
		if h := msg.GetHeader(); h != nil {
			stamp = h.GetStamp()
		}
		if stamp == nil {
			return nil, nil, lost("the first message is not the header")
		}
		for _, f := range msg.GetFeatures().GetFeatures() {
			if received++; f.GetStation() != nil {
				stations = append(stations, f)
			}
		}
		if end := msg.GetEnd(); end != nil {
			if end.GetFeatureCount() != received {
				return nil, nil, lost("%d features arrived, %d were sent", received, end.GetFeatureCount())
			}
			return stamp, stations, nil
		}
	}
}
