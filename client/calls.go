package client

import (
	"context"
	"iter"

	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// CreateFloor makes a floor. An empty request id is filled in.
func (c *Client) CreateFloor(ctx context.Context, req *wideberthv1.CreateFloorRequest) (*wideberthv1.CreateFloorResponse, error) {
	return c.floors.CreateFloor(ctx, req)
}

// GetFloor is one floor and its head.
func (c *Client) GetFloor(ctx context.Context, floor string) (*wideberthv1.Floor, error) {
	resp, err := c.floors.GetFloor(ctx, &wideberthv1.GetFloorRequest{Floor: floor})
	return resp.GetFloor(), err
}

// ListFloors yields all floors, by id, asking for page after page. An error ends it
// and comes with a nil floor.
func (c *Client) ListFloors(ctx context.Context) iter.Seq2[*wideberthv1.Floor, error] {
	return pages(func(token string) ([]*wideberthv1.Floor, string, error) {
		resp, err := c.floors.ListFloors(ctx, &wideberthv1.ListFloorsRequest{PageToken: token})
		return resp.GetFloors(), resp.GetNextPageToken(), err
	})
}

// PushPatch makes a new version. An empty request id is filled in.
func (c *Client) PushPatch(ctx context.Context, req *wideberthv1.PushPatchRequest) (*wideberthv1.PushPatchResponse, error) {
	return c.floors.PushPatch(ctx, req)
}

// ListVersions yields a floor's versions, newest first, asking for page after page.
// An error ends it and comes with a nil version.
func (c *Client) ListVersions(ctx context.Context, floor string) iter.Seq2[*wideberthv1.Version, error] {
	return pages(func(token string) ([]*wideberthv1.Version, string, error) {
		resp, err := c.floors.ListVersions(ctx, &wideberthv1.ListVersionsRequest{Floor: floor, PageToken: token})
		return resp.GetVersions(), resp.GetNextPageToken(), err
	})
}

// GetVersion is one version's record and what it was made of. A nil selector
// asks for the head.
func (c *Client) GetVersion(ctx context.Context, floor string, version *wideberthv1.VersionSelector) (*wideberthv1.GetVersionResponse, error) {
	return c.floors.GetVersion(ctx, &wideberthv1.GetVersionRequest{Floor: floor, Version: version})
}

// CompareVersions says what differs between two versions; to may be 0 for the head.
func (c *Client) CompareVersions(ctx context.Context, floor string, from, to int64) (*wideberthv1.CompareVersionsResponse, error) {
	return c.floors.CompareVersions(ctx, &wideberthv1.CompareVersionsRequest{Floor: floor, FromVersion: from, ToVersion: to})
}

// RestoreVersion makes a new version equal to an old one. An empty request id is
// filled in.
func (c *Client) RestoreVersion(ctx context.Context, req *wideberthv1.RestoreVersionRequest) (*wideberthv1.RestoreVersionResponse, error) {
	return c.floors.RestoreVersion(ctx, req)
}

// Plan asks for a route. "No way" is not an error but a refusal in the answer.
func (c *Client) Plan(ctx context.Context, req *wideberthv1.PlanRequest) (*wideberthv1.PlanResponse, error) {
	return c.routes.Plan(ctx, req)
}

// Replan asks what becomes of a route on a newer version.
func (c *Client) Replan(ctx context.Context, req *wideberthv1.ReplanRequest) (*wideberthv1.ReplanResponse, error) {
	return c.routes.Replan(ctx, req)
}

// GuideOnce asks for the advice for one report. A controller that can keep a
// stream should use Guide.
func (c *Client) GuideOnce(ctx context.Context, req *wideberthv1.GuideOnceRequest) (*wideberthv1.GuideOnceResponse, error) {
	return c.guides.GuideOnce(ctx, req)
}

// Newest selects the head at the time of asking.
func Newest() *wideberthv1.VersionSelector {
	return &wideberthv1.VersionSelector{Choice: &wideberthv1.VersionSelector_Newest{Newest: &wideberthv1.NewestVersion{}}}
}

// Pinned selects exactly version v.
func Pinned(v int64) *wideberthv1.VersionSelector {
	return &wideberthv1.VersionSelector{Choice: &wideberthv1.VersionSelector_Pinned{Pinned: v}}
}

// pages yields the items of page after page.
func pages[T any](next func(token string) ([]*T, string, error)) iter.Seq2[*T, error] {
	return func(yield func(*T, error) bool) {
		for token := ""; ; {
			items, following, err := next(token)
			if err != nil {
				yield(nil, err)
				return
			}
			for _, it := range items {
				if !yield(it, nil) {
					return
				}
			}
			if following == "" {
				return
			}
			token = following
		}
	}
}
