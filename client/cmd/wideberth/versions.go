package main

import (
	"fmt"
	"strconv"

	"github.com/spf13/cobra"

	"example.com/wideberth/client"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func (a *app) versions() *cobra.Command {
	var limit int
	cmd := &cobra.Command{
		Use:   "versions FLOOR",
		Short: "List a floor's versions, newest first",
		Args:  cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if limit < 0 {
				return usagef("--limit is %d, want 0 or more", limit)
			}
			return a.with(func(c *client.Client) error {
				all := &wideberthv1.ListVersionsResponse{}
				for v, err := range c.ListVersions(cmd.Context(), args[0]) {
					if err != nil {
						return err
					}
					all.Versions = append(all.Versions, v)
					if len(all.Versions) == limit {
						break
					}
				}
				if n := len(all.Versions); n > 0 && all.Versions[n-1].GetStamp().GetVersion() > 1 {
					a.notef("There are older versions; --limit 0 lists all.")
				}
				if a.json() {
					return a.message(all)
				}
				rows := [][]string{versionHead}
				for _, v := range all.Versions {
					rows = append(rows, versionRow(v))
				}
				return a.table(rows...)
			})
		},
	}
	cmd.Flags().IntVar(&limit, "limit", 20, "how many at most; 0 for all")
	return cmd
}

var versionHead = []string{"VERSION", "PUSHED", "KIND", "EDITS", "AUTHOR", "REASON"}

func versionRow(v *wideberthv1.Version) []string {
	kind := word(v.GetKind(), "VERSION_KIND_")
	if v.GetRestoredVersion() != 0 {
		kind += " " + number(v.GetRestoredVersion())
	}
	return []string{
		number(v.GetStamp().GetVersion()), when(v.GetPushTime()), kind, number(int64(v.GetEditCount())),
		plain(v.GetAuthor()), plain(v.GetReason()),
	}
}

func (a *app) compare() *cobra.Command {
	return &cobra.Command{
		Use:   "compare FLOOR FROM [TO]",
		Short: "Show what differs between two versions; TO defaults to the head",
		Args:  cobra.RangeArgs(2, 3),
		RunE: func(cmd *cobra.Command, args []string) error {
			from, err := versionArg("FROM", args[1])
			if err != nil {
				return err
			}
			var to int64
			if len(args) > 2 {
				if to, err = versionArg("TO", args[2]); err != nil {
					return err
				}
			}
			return a.with(func(c *client.Client) error {
				d, err := c.CompareVersions(cmd.Context(), args[0], from, to)
				if err != nil {
					return err
				}
				if a.json() {
					return a.message(d)
				}
				rows := [][]string{
					{"versions", fmt.Sprintf("%d to %d", d.GetFrom().GetVersion(), d.GetTo().GetVersion())},
					{"changed cells", number(d.GetChangedCells())},
				}
				for _, r := range d.GetChangedAreas() {
					rows = append(rows, []string{"changed area", area(r)})
				}
				for _, f := range d.GetFeatures() {
					what := "changed"
					switch {
					case f.GetBefore() == nil:
						what = "added"
					case f.GetAfter() == nil:
						what = "removed"
					}
					rows = append(rows, []string{"feature " + what, f.GetName()})
				}
				if d.GetTruncated() {
					a.notef("There is more than the service lists.")
				}
				return a.table(rows...)
			})
		},
	}
}

func versionArg(name, text string) (int64, error) {
	v, err := strconv.ParseInt(text, 10, 64)
	if err != nil || v < 1 {
		return 0, usagef("%s is %q, want a version: a whole number from 1", name, text)
	}
	return v, nil
}

func (a *app) restore() *cobra.Command {
	var (
		author, reason string
		base           int64
	)
	cmd := &cobra.Command{
		Use:   "restore FLOOR VERSION",
		Short: "Make a new version equal to an old one",
		Long: "Make a new version whose content equals an old one. Nothing is rewritten: the versions\n" +
			"between stay on record, but whatever they changed is taken back.",
		Example: "  wideberth versions hall\n" +
			"  wideberth compare hall 41\n" +
			"  wideberth restore hall 41 --author shift --reason \"spill is dry\"",
		Args: cobra.ExactArgs(2),
		RunE: func(cmd *cobra.Command, args []string) error {
			version, err := versionArg("VERSION", args[1])
			if err != nil {
				return err
			}
			if author == "" || reason == "" {
				return usagef("--author and --reason are both needed")
			}
			if cmd.Flags().Changed("base") && base < 1 {
				return usagef("--base is %d, want 1 or more", base)
			}
			return a.with(func(c *client.Client) error {
				if base == 0 {
					f, err := c.GetFloor(cmd.Context(), args[0])
					if err != nil {
						return err
					}
					base = f.GetHead().GetVersion()
					a.notef("base: the head, version %d", base)
				}
				resp, err := c.RestoreVersion(cmd.Context(), &wideberthv1.RestoreVersionRequest{
					Floor: args[0], RestoredVersion: version, BaseVersion: base, Author: author, Reason: reason,
				})
				if err != nil {
					return fmt.Errorf("restore version %d of floor %q: %w", version, args[0], err)
				}
				if a.json() {
					return a.message(resp)
				}
				v := resp.GetVersion()
				return a.table(
					[]string{"made", "version " + number(v.GetStamp().GetVersion())},
					[]string{"equal to", "version " + number(v.GetRestoredVersion())},
					[]string{"touched", area(v.GetTouched())},
					[]string{"digest", v.GetStamp().GetDigest()},
				)
			})
		},
	}
	f := cmd.Flags()
	a.authorFlag(cmd, &author, "who restores it (required)")
	f.StringVar(&reason, "reason", "", "why (required)")
	f.Int64Var(&base, "base", 0, "the `version` that was looked at; default the head")
	return cmd
}
