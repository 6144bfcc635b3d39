package main

import (
	"fmt"
	"os"
	"strings"

	"github.com/spf13/cobra"

	"example.com/wideberth/client"
	"example.com/wideberth/client/layout"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func (a *app) floors() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "floors",
		Short: "List the floors",
		Args:  cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return a.with(func(c *client.Client) error {
				all := &wideberthv1.ListFloorsResponse{}
				for f, err := range c.ListFloors(cmd.Context()) {
					if err != nil {
						return err
					}
					all.Floors = append(all.Floors, f)
				}
				if a.json() {
					return a.message(all)
				}
				rows := [][]string{{"FLOOR", "VERSION", "SIZE", "RESOLUTION", "CREATED"}}
				for _, f := range all.Floors {
					s := f.GetSettings()
					rows = append(rows, []string{
						f.GetId(), number(f.GetHead().GetVersion()), size(s), metres(s.GetResolutionM()) + " m", when(f.GetCreateTime()),
					})
				}
				return a.table(rows...)
			})
		},
	}
	cmd.AddCommand(a.showFloor(), a.createFloor())
	return cmd
}

func size(s *wideberthv1.FloorSettings) string {
	return fmt.Sprintf("%s x %s m", metres(float64(s.GetColumns())*s.GetResolutionM()), metres(float64(s.GetRows())*s.GetResolutionM()))
}

func (a *app) showFloor() *cobra.Command {
	return &cobra.Command{
		Use:   "show FLOOR",
		Short: "Show one floor and its head",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.with(func(c *client.Client) error {
				f, err := c.GetFloor(cmd.Context(), args[0])
				if err != nil {
					return err
				}
				return a.printFloor(f)
			})
		},
	}
}

func (a *app) printFloor(f *wideberthv1.Floor) error {
	if a.json() {
		return a.message(f)
	}
	s := f.GetSettings()
	border, unknown := "solid", "occupied"
	if s.GetOpenBorder() {
		border = "open"
	}
	if s.GetUnknownIsFree() {
		unknown = "free"
	}
	return a.table(
		[]string{"floor", f.GetId()},
		[]string{"head", "version " + number(f.GetHead().GetVersion())},
		[]string{"digest", f.GetHead().GetDigest()},
		[]string{"oldest version", number(f.GetOldestVersion())},
		[]string{"size", size(s)},
		[]string{"cells", fmt.Sprintf("%d x %d of %s m", s.GetColumns(), s.GetRows(), metres(s.GetResolutionM()))},
		[]string{"origin", at(s.GetOrigin())},
		[]string{"clearance cap", metres(s.GetClearanceCapM()) + " m"},
		[]string{"outer border", border},
		[]string{"unknown counts as", unknown},
		[]string{"created", when(f.GetCreateTime())},
	)
}

func (a *app) createFloor() *cobra.Command {
	var (
		from, author, origin, initial string
		set                           wideberthv1.FloorSettings
	)
	cmd := &cobra.Command{
		Use:   "create [FLOOR]",
		Short: "Create a floor, from a description or from flags",
		Long: "Create a floor at version 1. With --from the settings come from a floor description\n" +
			"(YAML), whose layout is then pushed; FLOOR may be left out and is then the\n" +
			"description's own. Without it they come from flags.",
		Args: cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if author == "" {
				return usagef("--author is missing")
			}
			req := &wideberthv1.CreateFloorRequest{Settings: &set, Author: author}
			var plan *layout.Layout
			if from != "" {
				for _, name := range []string{"columns", "rows", "resolution", "origin", "cap", "open-border", "unknown-is-free", "initial"} {
					if cmd.Flags().Changed(name) {
						return usagef("--%s does not go with --from: the description says it", name)
					}
				}
				var err error
				if plan, err = layout.ReadFile(from); err != nil {
					return err
				}
				req.Floor, req.Settings = plan.Floor, plan.Settings
			} else if err := settingsFromFlags(&set, origin, initial); err != nil {
				return err
			}
			if len(args) > 0 {
				req.Floor = args[0]
			}
			if req.Floor == "" {
				return usagef("FLOOR is missing")
			}
			return a.with(func(c *client.Client) error {
				made, err := c.CreateFloor(cmd.Context(), req)
				if err != nil {
					return err
				}
				floor := made.GetFloor()
				if plan != nil {
					if floor, err = a.pushLayout(cmd, c, floor, plan, author); err != nil {
						return err
					}
				}
				return a.printFloor(floor)
			})
		},
	}
	f := cmd.Flags()
	f.StringVar(&from, "from", "", "read settings and layout from this floor description `file`")
	a.authorFlag(cmd, &author, "who creates it (required)")
	f.Int32Var(&set.Columns, "columns", 0, "cells from left to right")
	f.Int32Var(&set.Rows, "rows", 0, "cells from bottom to top")
	set.ResolutionM = new(float64)
	f.Float64Var(set.ResolutionM, "resolution", 0.05, "`metres` per cell")
	f.StringVar(&origin, "origin", "0,0", "`x,y` of the lower left corner, in metres")
	f.Float64Var(&set.ClearanceCapM, "cap", 0, "largest clearance told apart, in `metres`; 0 asks for 5, or 250 cells")
	f.BoolVar(&set.OpenBorder, "open-border", false, "the outer border is open, not solid")
	f.BoolVar(&set.UnknownIsFree, "unknown-is-free", false, "unknown cells count as free")
	f.StringVar(&initial, "initial", "unknown", "what every cell holds at first: free, occupied or unknown")
	return cmd
}

func settingsFromFlags(set *wideberthv1.FloorSettings, origin, initial string) error {
	xy, err := numbers(origin)
	if err != nil || len(xy) != 2 {
		return usagef("--origin is %q, want x,y", origin)
	}
	set.Origin = &wideberthv1.Point{XM: xy[0], YM: xy[1]}
	o, ok := wideberthv1.Occupancy_value["OCCUPANCY_"+strings.ToUpper(initial)]
	if !ok || o == 0 {
		return usagef("--initial is %q, want free, occupied or unknown", initial)
	}
	set.InitialOccupancy = wideberthv1.Occupancy(o)
	return nil
}

// pushLayout pushes a description's layout onto a floor that holds what it was created
// with: nothing was pushed to it yet, or version 1 was restored.
func (a *app) pushLayout(cmd *cobra.Command, c *client.Client, f *wideberthv1.Floor, l *layout.Layout, author string) (*wideberthv1.Floor, error) {
	head := f.GetHead()
	if head.GetVersion() != 1 {
		first, err := c.GetVersion(cmd.Context(), f.GetId(), client.Pinned(1))
		if err != nil {
			return nil, err
		}
		if first.GetVersion().GetStamp().GetDigest() != head.GetDigest() {
			a.notef("The floor was there already, at version %d; its layout is left as it is.", head.GetVersion())
			return f, nil
		}
	}
	patches := l.Patches(head.GetVersion(), author, "layout from its description")
	for i, p := range patches {
		resp, err := c.PushPatch(cmd.Context(), &wideberthv1.PushPatchRequest{Floor: f.GetId(), Patch: p})
		if err != nil {
			a.notef("The floor is made, but without its whole layout. Mend the description and run this again.")
			if i > 0 {
				a.notef("First take back what was pushed of it: wideberth restore %s 1 --author WHO --reason WHY", f.GetId())
			}
			return nil, fmt.Errorf("layout, patch %d of %d: %w", i+1, len(patches), err)
		}
		a.notef("layout, patch %d of %d: version %d", i+1, len(patches), resp.GetVersion().GetStamp().GetVersion())
	}
	return c.GetFloor(cmd.Context(), f.GetId())
}

// writeFile writes a file whole or not at all.
func writeFile(path string, write func(*os.File) error) (err error) {
	dir, base := splitPath(path)
	f, err := os.CreateTemp(dir, base+".*")
	if err != nil {
		return err
	}
	defer func() {
		if err != nil {
			_ = f.Close() // the first error is the one that counts
			_ = os.Remove(f.Name())
		}
	}()
	if err = write(f); err != nil {
		return fmt.Errorf("%s: %w", path, err)
	}
	if err = f.Chmod(0o644); err != nil {
		return err
	}
	if err = f.Close(); err != nil {
		return err
	}
	return os.Rename(f.Name(), path)
}
