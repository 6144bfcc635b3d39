package client_test

import (
	"context"
	"fmt"
	"log"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

// A dispatcher looks for the truck that has the shortest way to a job. One truck
// stands where the body does not fit: that is an answer too.
func ExampleClient_PlanMany() {
	ctx := context.Background()
	c, stop := serve()
	defer stop()
	newHall(ctx, c)

	trucks := []*wideberthv1.Place{at(1, 1), at(6, 3), at(0.1, 2)}
	best := client.ManyAnswer{}
	for a, err := range c.PlanMany(ctx, &wideberthv1.PlanManyRequest{
		Floor: "hall", Starts: trucks, Goals: []*wideberthv1.Place{at(7, 2)},
		Body: &wideberthv1.Body{RadiusM: 0.4},
	}) {
		if err != nil { // not every truck was answered for
			log.Fatal(err)
		}
		way := a.Answer.GetSummary()
		if way == nil {
			fmt.Printf("not truck %d: %s\n", a.Answer.GetStartIndex(), a.Answer.GetRefusal().GetExplanation())
			continue
		}
		if best.Answer == nil || way.GetCostM() < best.Answer.GetSummary().GetCostM() {
			best = a
		}
	}
	fmt.Printf("truck %d on version %d: %.2f m\n",
		best.Answer.GetStartIndex(), best.Header.GetStamp().GetVersion(), best.Answer.GetSummary().GetLengthM())
	// Output:
	// not truck 2: start: clearance 0.10 m, needed 0.40 m
	// truck 1 on version 1: 1.41 m
}
