package main

import (
	"fmt"
	"io"
	"slices"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"foldshade/geometry"
)

func newHelp() *cobra.Command {
	return &cobra.Command{
		Use:    "help [COMMAND]",
		Short:  "the help of a command",
		Hidden: true,
		RunE: func(cmd *cobra.Command, args []string) error {
			of, rest, err := cmd.Root().Find(args)
			if err != nil || len(rest) > 0 {
				return noSuchCommand(cmd.Root(), args)
			}
			return of.Help()
		},
	}
}

// printHelp writes the help of a command: what it does, its flags under their
// headings, the exit status, and an example that runs.
func printHelp(cmd *cobra.Command, _ []string) {
	w := cmd.OutOrStdout()
	fmt.Fprintf(w, "%s\n\nUsage:\n  %s\n", describe(cmd), cmd.UseLine())
	if cmd.HasAvailableSubCommands() {
		fmt.Fprintf(w, "\nCommands:\n")
		for _, c := range cmd.Commands() {
			if c.IsAvailableCommand() {
				fmt.Fprintf(w, "  %-10s %s\n", c.Name(), c.Short)
			}
		}
	}
	for _, group := range groups {
		printFlags(w, group, flagsOf(cmd, group))
	}
	printFlags(w, "Other", flagsOf(cmd, ""))
	if cmd.Flags().Lookup("look") != nil {
		fmt.Fprintf(w, "\nKeys of a look:\n")
		for line := range strings.Lines(geometry.KeyHelp(kindsOf(cmd)...)) {
			printWrapped(w, strings.TrimSpace(line))
		}
	}
	if !cmd.HasParent() {
		fmt.Fprint(w, "\n"+exitStatus)
	}
	if cmd.Example != "" {
		fmt.Fprintf(w, "\nExample:\n%s\n", cmd.Example)
	}
	if !cmd.HasParent() {
		fmt.Fprint(w, "\n`foldshade COMMAND --help` describes a command, `foldshade completion --help` the\ncompletion scripts for shells.\n")
	}
}

// kindsOf returns the kinds of look that a command takes.
func kindsOf(cmd *cobra.Command) []geometry.Kind {
	if cmd.Name() == "looks" {
		return geometry.Kinds
	}
	return geometry.DrivenKinds
}

// printWrapped writes a word and the text after it in two columns of a page of
// 80.
func printWrapped(w io.Writer, line string) {
	const first, page = 20, 80
	name, text, _ := strings.Cut(line, " ")
	used := 0
	fmt.Fprintf(w, "  %-*s", first, name)
	for _, word := range strings.Fields(text) {
		if used > 0 && 2+first+used+1+len(word) > page {
			fmt.Fprintf(w, "\n  %*s", first, "")
			used = 0
		}
		n, _ := fmt.Fprintf(w, " %s", word)
		used += n
	}
	fmt.Fprintln(w)
}

const exitStatus = `Exit status:
  0    done
  1    a --require was not met
  2    the command line is wrong
  3    an input is wrong or cannot be read
  4    an output could not be written
  130  interrupted
`

func describe(cmd *cobra.Command) string {
	if cmd.Long != "" {
		return cmd.Long
	}
	return cmd.Short
}

// flagsOf returns the flags of a command filed under a heading; the empty
// heading holds those that are filed nowhere.
func flagsOf(cmd *cobra.Command, group string) []*pflag.Flag {
	var found []*pflag.Flag
	cmd.Flags().VisitAll(func(f *pflag.Flag) {
		if annotation(f, groupKey) == group && !f.Hidden {
			found = append(found, f)
		}
	})
	return found
}

func annotation(f *pflag.Flag, key string) string {
	return strings.Join(f.Annotations[key], "")
}

// printFlags writes one heading and its flags in two columns.
func printFlags(w io.Writer, heading string, flags []*pflag.Flag) {
	if len(flags) == 0 {
		return
	}
	names := make([]string, len(flags))
	texts := make([]string, len(flags))
	for i, f := range flags {
		names[i] = strings.TrimRight("--"+f.Name+" "+annotation(f, placeholderKey), " ")
		if f.Shorthand != "" {
			names[i] = "-" + f.Shorthand + ", " + names[i]
		}
		texts[i] = f.Usage
		if f.DefValue != "" && f.DefValue != "false" && f.DefValue != "[]" {
			texts[i] += " (default " + f.DefValue + ")"
		}
	}
	width := len(slices.MaxFunc(names, func(a, b string) int { return len(a) - len(b) }))
	fmt.Fprintf(w, "\n%s:\n", heading)
	for i, name := range names {
		for j, line := range strings.Split(texts[i], "\n") {
			if j > 0 {
				name = ""
			}
			fmt.Fprintf(w, "  %-*s  %s\n", width, name, line)
		}
	}
}
