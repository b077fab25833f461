package main

import (
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"
)

// completeFlags says how the shell completes what the commands' flags and
// arguments take: ports from this machine, files of the right kind from this
// folder. Nothing is opened for it.
func completeFlags(root *cobra.Command) {
	flags := map[string]cobra.CompletionFunc{
		"port": completePorts,
		"rig":  filesLike(".toml"), "sim": filesLike(".toml"), "adapter": filesLike(".toml"),
		"model": filesLike(".json"), "gains": filesLike(".json"), "out": folders,
	}
	args := map[string]cobra.CompletionFunc{
		"check": filesLike(".toml"), "sim": filesLike(".toml"), "fit": filesLike(".csv"),
		"report": folders, "card": folders, "compare": folders, "recompute": folders, "export": folders, "rehearse": folders,
	}
	for _, c := range append(root.Commands(), root) {
		for name, complete := range flags {
			if c.Flags().Lookup(name) != nil {
				_ = c.RegisterFlagCompletionFunc(name, complete) // fails only for a flag that is not there
			}
		}
		if complete := args[c.Name()]; complete != nil && c.ValidArgsFunction == nil {
			c.ValidArgsFunction = complete
		}
	}
}

// completePorts offers the ports of this machine with what the system knows of them.
func completePorts(_ *cobra.Command, _ []string, _ string) ([]cobra.Completion, cobra.ShellCompDirective) {
	var out []cobra.Completion
	for _, p := range portViews() {
		if p.Path == "" {
			continue
		}
		out = append(out, cobra.CompletionWithDesc(p.Path, strings.TrimSpace(p.Product+" "+p.Serial)))
	}
	return out, cobra.ShellCompDirectiveDefault // a pseudo-terminal is opened by its path
}

// filesLike offers files with an ending, and folders to go into.
func filesLike(ending string) cobra.CompletionFunc {
	return func(_ *cobra.Command, _ []string, begun string) ([]cobra.Completion, cobra.ShellCompDirective) {
		names, _ := filepath.Glob(escapeGlob(begun) + "*")
		var out []cobra.Completion
		for _, n := range names {
			info, err := os.Stat(n)
			switch {
			case err != nil:
			case info.IsDir():
				out = append(out, n+string(filepath.Separator))
			case strings.HasSuffix(n, ending):
				out = append(out, n)
			}
		}
		return out, cobra.ShellCompDirectiveNoFileComp | cobra.ShellCompDirectiveNoSpace
	}
}

// escapeGlob takes the meaning from what Glob would read as a pattern.
func escapeGlob(s string) string {
	if os.PathSeparator == '\\' {
		return s // Glob has no escape there
	}
	return strings.NewReplacer(`\`, `\\`, `*`, `\*`, `?`, `\?`, `[`, `\[`).Replace(s)
}

func folders(*cobra.Command, []string, string) ([]cobra.Completion, cobra.ShellCompDirective) {
	return nil, cobra.ShellCompDirectiveFilterDirs
}
