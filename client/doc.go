// Package client is the Go client of a wideberth service, for robot controllers
// and operators' tools.
//
// Start with Dial. A Client is safe for any number of goroutines and keeps one
// connection, which it mends by itself. Its methods take and give the messages
// of package wideberthv1 and add what a caller on a network that drops would
// otherwise write again each time:
//
//   - a deadline where the caller set none (see Timeouts),
//   - sending again, with jittered waits, what failed with UNAVAILABLE or was
//     turned away with a time to come back, until the context ends,
//   - a request id on everything that changes a floor, so that a call sent again
//     is the same call and not a second one,
//   - streams that are taken up again where they broke: Watch and Guide,
//   - whole floors put together and checked: ReadFloor,
//   - many routes at once, each pair answered: PlanMany,
//   - roadmaps and grown solids put together: ShowRoadmap, ShowGrownSolids,
//   - how long a route may still be acted on: Validity.
//
// Errors are gRPC statuses, wrapped: status.Code and ReasonOf read them. What a
// service answers is a planning figure and not a safety function: personnel
// detection, stopping and speed supervision stay with the truck's safety-rated
// system, and people and loose loads are not on the map.
package client
