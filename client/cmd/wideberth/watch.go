package main

import (
	"errors"
	"strings"

	"github.com/spf13/cobra"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func (a *app) watch() *cobra.Command {
	var (
		after int64
		count int
		beats bool
	)
	cmd := &cobra.Command{
		Use:   "watch FLOOR",
		Short: "Print versions as they appear, until interrupted",
		Long: "Print versions as they appear, until interrupted, each on a line. A connection that\n" +
			"breaks is taken up where it broke; stderr says so.",
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if after < 0 || count < 0 {
				return usagef("--after and --count must not be below 0")
			}
			return a.with(func(c *client.Client) error {
				// A watch would try for ever: say now if there is no server, or no floor.
				if _, err := c.GetFloor(cmd.Context(), args[0]); err != nil {
					return err
				}
				if !a.json() {
					a.notef("%s", strings.Join(versionHead, "  "))
				}
				seen, down := 0, false
				for ev, err := range c.Watch(cmd.Context(), args[0], after) {
					switch {
					case err != nil && cmd.Context().Err() != nil && errors.Is(err, cmd.Context().Err()):
						return nil // interrupted: that is how a watch ends
					case err != nil:
						return err
					case ev.Broken != nil:
						down = true
						a.notef("connection lost, trying again: %v", ev.Broken)
						continue
					case down:
						down = false
						a.notef("connected again")
					}
					if ev.Version == nil && !beats {
						continue
					}
					if err := a.printEvent(ev); err != nil {
						return err
					}
					if ev.Version != nil {
						if seen++; seen == count {
							return nil
						}
					}
				}
				return nil
			})
		},
	}
	f := cmd.Flags()
	f.Int64Var(&after, "after", 0, "begin after this `version`; 0 begins with the head")
	f.IntVar(&count, "count", 0, "stop after this many versions; 0 goes on")
	f.BoolVar(&beats, "heartbeats", false, "print heartbeats too")
	return cmd
}

func (a *app) printEvent(ev client.WatchEvent) error {
	if a.json() {
		m := &wideberthv1.WatchVersionsResponse{Event: &wideberthv1.WatchVersionsResponse_Heartbeat{
			Heartbeat: &wideberthv1.Heartbeat{Head: ev.Head},
		}}
		if ev.Version != nil {
			m.Event = &wideberthv1.WatchVersionsResponse_Version{
				Version: &wideberthv1.VersionEvent{Version: ev.Version, Skipped: ev.Skipped},
			}
		}
		return a.line(m)
	}
	if ev.Version == nil {
		return a.table([]string{number(ev.Head.GetVersion()), "heartbeat"})
	}
	row := versionRow(ev.Version)
	if ev.Skipped > 0 {
		row = append(row, "("+number(ev.Skipped)+" before it not shown)")
	}
	return a.table([]string{strings.Join(row, "  ")})
}
