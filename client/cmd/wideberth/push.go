package main

import (
	"fmt"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"example.com/wideberth/client"
	"example.com/wideberth/client/layout"
	"example.com/wideberth/client/patchfile"
	wideberthv1 "example.com/wideberth/proto/wideberth/v1"
)

func (a *app) push() *cobra.Command {
	var (
		author, reason, change, requestID string
		base                              int64
		dryRun, rebase                    bool
	)
	cmd := &cobra.Command{
		Use:   "push FLOOR FILE",
		Short: "Push a patch",
		Long: "Push the patch in FILE: a Patch message in JSON, or a GeoJSON FeatureCollection with\n" +
			"\"frame\": \"floor-metres\". With --change FILE is a floor description (YAML) and the\n" +
			"named change in it is pushed. Flags go before what the file says. A change that does\n" +
			"not fit one message becomes several versions, printed one after the other.",
		Example: "  wideberth push hall spill.geojson --author shift --reason \"spill by dock 3\" --dry-run\n" +
			"  wideberth push hall spill.geojson --author shift --reason \"spill by dock 3\"\n" +
			"  wideberth push hall hall.yaml --change two-o-clock --author shift",
		Args: cobra.ExactArgs(2),
		RunE: func(cmd *cobra.Command, args []string) error {
			patches, err := readPatches(args[1], change)
			if err != nil {
				return err
			}
			first := patches[0]
			if cmd.Flags().Changed("base") {
				if base < 1 {
					return usagef("--base is %d, want 1 or more", base)
				}
				first.BaseVersion = base
			}
			for _, p := range patches {
				if cmd.Flags().Changed("author") || p.Author == "" {
					p.Author = author
				}
				p.Reason = or(reason, p.Reason)
			}
			if first.Author == "" {
				return usagef("--author is missing, and the file names none")
			}
			if first.Reason == "" {
				return usagef("--reason is missing, and the file gives none")
			}
			if len(patches) > 1 && (dryRun || requestID != "") {
				return usagef("the change needs %d patches: --dry-run and --request-id go with one", len(patches))
			}
			return a.with(func(c *client.Client) error {
				if first.BaseVersion == 0 {
					f, err := c.GetFloor(cmd.Context(), args[0])
					if err != nil {
						return err
					}
					first.BaseVersion = f.GetHead().GetVersion()
					a.notef("base: the head, version %d", first.BaseVersion)
				}
				base, repeated := first.BaseVersion, false
				for _, p := range patches {
					p.BaseVersion = base
					resp, err := c.PushPatch(cmd.Context(), &wideberthv1.PushPatchRequest{
						Floor: args[0], Patch: p, RequestId: requestID, ValidateOnly: dryRun, AllowRebase: rebase,
					})
					if err != nil {
						return fmt.Errorf("push to floor %q: %w", args[0], err)
					}
					base, repeated = resp.GetVersion().GetStamp().GetVersion(), repeated || resp.GetRepeatedRequest()
					if err := a.printPushed(resp, dryRun); err != nil {
						return err
					}
				}
				// Versions that came between would be taken back too: no hint then.
				if !dryRun && !repeated && base == first.BaseVersion+int64(len(patches)) {
					a.notef("To take it back, while nothing newer is there: wideberth restore %s %d --author WHO --reason WHY", args[0], first.BaseVersion)
				}
				return nil
			})
		},
	}
	f := cmd.Flags()
	a.authorFlag(cmd, &author, "who pushes it")
	f.StringVar(&reason, "reason", "", "why")
	f.Int64Var(&base, "base", 0, "the `version` that was looked at; default the file's, or else the head")
	f.StringVar(&change, "change", "", "push the change of this `name` from a floor description")
	f.StringVar(&requestID, "request-id", "", "push under this `id`: the same id again gives the first answer")
	f.BoolVar(&dryRun, "dry-run", false, "check everything, change nothing")
	f.BoolVar(&rebase, "allow-rebase", false, "accept a base below the head where nothing touched overlaps")
	return cmd
}

// readPatches reads what is to be pushed, at least one patch.
func readPatches(path, change string) ([]*wideberthv1.Patch, error) {
	if change == "" {
		if ext := strings.ToLower(filepath.Ext(path)); ext == ".yaml" || ext == ".yml" {
			return nil, usagef("%s is a floor description by its name: --change says which change in it", path)
		}
		p, err := patchfile.ReadFile(path)
		return []*wideberthv1.Patch{p}, err
	}
	l, err := layout.ReadFile(path)
	if err != nil {
		return nil, err
	}
	ch, ok := l.Change(change)
	if !ok {
		return nil, usagef("%s has no change %q", path, change)
	}
	patches := ch.Patches(0, "")
	if len(patches) == 0 {
		return nil, usagef("%s: change %q has nothing to push", path, change)
	}
	return patches, nil
}

func (a *app) printPushed(resp *wideberthv1.PushPatchResponse, dryRun bool) error {
	if a.json() {
		return a.message(resp)
	}
	v := resp.GetVersion()
	verb := "made"
	switch {
	case dryRun:
		verb = "would be"
	case resp.GetRepeatedRequest():
		verb = "made before"
	}
	return a.table(
		[]string{verb, "version " + number(v.GetStamp().GetVersion())},
		[]string{"base", number(v.GetBaseVersion())},
		[]string{"edits", number(int64(v.GetEditCount()))},
		[]string{"touched", area(v.GetTouched())},
		[]string{"digest", v.GetStamp().GetDigest()},
	)
}

// or is a, unless that is empty.
func or(a, b string) string {
	if a != "" {
		return a
	}
	return b
}
