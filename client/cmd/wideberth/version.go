package main

import (
	"runtime"
	"runtime/debug"

	"github.com/spf13/cobra"
)

// build is what this binary was made from, as version prints it in JSON.
type build struct {
	Version  string `json:"version"`  // of the module; "(devel)" for a checkout
	Revision string `json:"revision"` // of the source; empty when not known
	Modified bool   `json:"modified"` // whether the source differed from it
	Go       string `json:"go"`
}

func (a *app) version() *cobra.Command {
	return &cobra.Command{
		Use:   "version",
		Short: "Say which build this is",
		Args:  cobra.NoArgs,
		RunE: func(*cobra.Command, []string) error {
			b := thisBuild()
			if a.json() {
				return a.object(b)
			}
			revision := or(b.Revision, "unknown")
			if b.Modified {
				revision += " (modified)"
			}
			return a.table([]string{"wideberth", b.Version}, []string{"revision", revision}, []string{"go", b.Go})
		},
	}
}

func thisBuild() build {
	b := build{Version: "(devel)", Go: runtime.Version()}
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return b
	}
	b.Version = or(info.Main.Version, b.Version)
	for _, s := range info.Settings {
		switch s.Key {
		case "vcs.revision":
			b.Revision = s.Value
		case "vcs.modified":
			b.Modified = s.Value == "true"
		}
	}
	return b
}
