package client_test

import (
	"context"
	"fmt"
	"log"
	"time"

	"google.golang.org/protobuf/proto"

	"example.com/wideberth/client"
	"example.com/wideberth/client/trial"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// serve starts a server in this process and gives a client for it, and what ends both.
func serve() (*client.Client, func()) {
	addr, stop, err := trial.Embedded(context.Background())
	if err != nil {
		log.Fatal(err)
	}
	c, err := client.Dial(addr)
	if err != nil {
		log.Fatal(err)
	}
	return c, func() {
		_ = c.Close()
		if err := stop(); err != nil {
			log.Fatal(err)
		}
	}
}

// newHall makes an empty hall of 8 x 4 m.
func newHall(ctx context.Context, c *client.Client) {
	_, err := c.CreateFloor(ctx, &wideberthv1.CreateFloorRequest{
		Floor: "hall",
		Settings: &wideberthv1.FloorSettings{
			ResolutionM: proto.Float64(0.05), Columns: 160, Rows: 80,
			InitialOccupancy: wideberthv1.Occupancy_OCCUPANCY_FREE,
		},
		Author: "engineer",
	})
	if err != nil {
		log.Fatal(err)
	}
}

// spill is an edit that puts a round solid.
func spill(x, y, radius float64) *wideberthv1.Edit {
	return &wideberthv1.Edit{Action: &wideberthv1.Edit_PutFeature{PutFeature: &wideberthv1.PutFeature{
		Feature: &wideberthv1.Feature{Name: "spill", Kind: &wideberthv1.Feature_Solid{Solid: &wideberthv1.Solid{
			Shape: &wideberthv1.Solid_Disc{Disc: &wideberthv1.Disc{Center: &wideberthv1.Point{XM: x, YM: y}, RadiusM: radius}},
		}}},
	}}}
}

func at(x, y float64) *wideberthv1.Place {
	return &wideberthv1.Place{Where: &wideberthv1.Place_Pose{Pose: &wideberthv1.Pose{XM: x, YM: y}}}
}

// A controller asks for a route, an operator marks a spill on it, and the
// controller asks again.
func Example() {
	ctx := context.Background()
	c, stop := serve()
	defer stop()
	newHall(ctx, c)

	question := &wideberthv1.PlanRequest{
		Floor: "hall", Start: at(1, 2), Goal: at(7, 2),
		Body:    &wideberthv1.Body{Name: "tug", RadiusM: 0.4},
		Options: &wideberthv1.PlanOptions{Preference: wideberthv1.Preference_PREFERENCE_SHORTEST},
	}
	answer, err := c.Plan(ctx, question)
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("version %d: %.2f m\n", answer.GetStamp().GetVersion(), answer.GetRoute().GetLengthM())

	pushed, err := c.PushPatch(ctx, &wideberthv1.PushPatchRequest{
		Floor: "hall",
		Patch: &wideberthv1.Patch{
			BaseVersion: answer.GetStamp().GetVersion(),
			Author:      "night shift", Reason: "spill in the middle",
			Edits: []*wideberthv1.Edit{spill(4, 2, 0.5)},
		},
	})
	if err != nil {
		log.Fatal(err)
	}

	again, err := c.Replan(ctx, &wideberthv1.ReplanRequest{
		Version:  client.Pinned(pushed.GetVersion().GetStamp().GetVersion()),
		Previous: answer.GetRoute(),
		Pose:     answer.GetRoute().GetStart(),
	})
	if err != nil {
		log.Fatal(err)
	}
	fmt.Printf("version %d: the old route was cut: %v, the new one is longer: %v\n",
		again.GetStamp().GetVersion(),
		again.GetCause() == wideberthv1.ReplanCause_REPLAN_CAUSE_CUT,
		again.GetRoute().GetLengthM() > answer.GetRoute().GetLengthM())
	// Output:
	// version 1: 6.00 m
	// version 2: the old route was cut: true, the new one is longer: true
}

// A controller drives on a route only while the service keeps saying that the map
// it was checked against is the newest.
func ExampleValidity() {
	ctx := context.Background()
	c, stop := serve()
	defer stop()
	newHall(ctx, c)
	answer, err := c.Plan(ctx, &wideberthv1.PlanRequest{
		Floor: "hall", Start: at(1, 2), Goal: at(7, 2), Body: &wideberthv1.Body{RadiusM: 0.4},
	})
	if err != nil {
		log.Fatal(err)
	}
	validity := client.NewValidity(answer.GetRoute(), time.Now)
	fmt.Println("may act:", validity.MayAct())

	for event, err := range c.Watch(ctx, "hall", answer.GetStamp().GetVersion()) {
		if err != nil {
			log.Fatal(err)
		}
		validity.Observe(event)
		if validity.Superseded() {
			fmt.Println("version", event.Head.GetVersion(), "is newer: ask for a replan")
			break
		}
		// Here a real controller goes on; this one has the floor changed.
		if _, err := c.PushPatch(ctx, &wideberthv1.PushPatchRequest{
			Floor: "hall",
			Patch: &wideberthv1.Patch{
				BaseVersion: event.Head.GetVersion(), Author: "night shift", Reason: "spill",
				Edits: []*wideberthv1.Edit{spill(4, 1, 0.3)},
			},
		}); err != nil {
			log.Fatal(err)
		}
	}
	// Output:
	// may act: true
	// version 2 is newer: ask for a replan
}
