// Command foldshade says, from an elevation model and a radar look geometry,
// which ground the radar sees once, which it folds and which it hides.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"strings"
	"syscall"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"

	"foldshade/dem/raster"
	"foldshade/geometry"
)

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	// Only the first signal is ours: a second one ends the process at once.
	context.AfterFunc(ctx, stop)
	// A file size limit shall be an error of the write, not the end.
	signal.Ignore(syscall.SIGXFSZ)
	os.Exit(run(ctx, os.Args[1:], os.Stdin, os.Stdout, os.Stderr))
}

// The exit codes, as the help and docs/scripting.md list them.
const (
	exitDone        = 0
	exitRequire     = 1 // a --require was not met
	exitUsage       = 2
	exitInput       = 3
	exitOutput      = 4
	exitInterrupted = 130 // 128 + SIGINT, as shells report it
)

// run is the whole program but for the process around it: it reads the
// arguments, does the work and returns the exit code.
func run(ctx context.Context, args []string, stdin io.Reader, stdout, stderr io.Writer) int {
	out := &sink{w: stdout}
	root := newRoot(append([]string{"foldshade"}, args...))
	root.SetArgs(args)
	root.SetIn(stdin)
	root.SetOut(out)
	root.SetErr(stderr)
	err := root.ExecuteContext(ctx)
	if out.err != nil {
		err = out.err // the cause, whatever came of it
	}
	return report(ctx, stderr, err)
}

// report prints the error, one line and at most one hint, and returns the
// exit code that belongs to it.
func report(ctx context.Context, stderr io.Writer, err error) int {
	if err == nil {
		return exitDone
	}
	if ctx.Err() != nil {
		fmt.Fprintln(stderr, "foldshade: interrupted; nothing was left half-written")
		return exitInterrupted
	}
	fmt.Fprintf(stderr, "foldshade: %s\n", oneLine(err.Error()))
	var hinted *hintError
	if errors.As(err, &hinted) {
		fmt.Fprintf(stderr, "hint: %s\n", oneLine(hinted.hint))
	}
	var usage *usageError
	var output *outputError
	var written *raster.OutputError
	switch {
	case errors.Is(err, errRequire):
		return exitRequire
	case errors.As(err, &usage):
		return exitUsage
	case errors.As(err, &output), errors.As(err, &written):
		return exitOutput
	default:
		return exitInput
	}
}

// oneLine keeps an error on one line, whatever a library or a file name put
// into it.
func oneLine(s string) string {
	return strings.Join(strings.FieldsFunc(s, func(r rune) bool { return r == '\n' || r == '\r' }), " ")
}

// errRequire says that a condition given with --require does not hold.
var errRequire = errors.New("requirement not met")

// usageError is a mistake on the command line.
type usageError struct{ error }

func (e *usageError) Unwrap() error { return e.error }

func usagef(format string, args ...any) error {
	return &usageError{fmt.Errorf(format, args...)}
}

// outputError is a result that could not be written.
type outputError struct{ error }

func (e *outputError) Unwrap() error { return e.error }

func outputf(format string, args ...any) error {
	return &outputError{fmt.Errorf(format, args...)}
}

// hintError carries the next step beside an error.
type hintError struct {
	error
	hint string
}

func (e *hintError) Unwrap() error { return e.error }

// hint adds a next step to an error; an empty one adds nothing.
func hint(err error, next string) error {
	if err == nil || next == "" {
		return err
	}
	return &hintError{err, next}
}

// sink is the standard output. It keeps the first write error, which printing
// functions drop, so that a full disk behind a redirection is not taken for
// success.
type sink struct {
	w   io.Writer
	err error
}

func (s *sink) Write(p []byte) (int, error) {
	n, err := s.w.Write(p)
	if err != nil && s.err == nil {
		s.err = hint(outputf("standard output: %w", err), "the results on standard output are incomplete")
	}
	return n, err
}

// newRoot builds the command tree. The command is what the user wrote, one
// word an element; the files repeat it.
func newRoot(command []string) *cobra.Command {
	root := &cobra.Command{
		Use:   "foldshade",
		Short: "radar layover, shadow and incidence from a DEM and a look geometry",
		Long: `foldshade computes, for every cell of an elevation model, whether a radar look
sees it once, folds it (layover) or hides it (shadow), by what margin, and under
which incidence.`,
		Example: `  foldshade demo --out valley
  foldshade inspect valley/valley.tif
  foldshade layers valley/valley.tif --look name=east,incidence=38,azimuth=78 --out east`,
		Args:              noSuchCommand,
		RunE:              func(cmd *cobra.Command, _ []string) error { return cmd.Help() },
		SilenceErrors:     true,
		SilenceUsage:      true,
		DisableAutoGenTag: true,
	}
	root.CompletionOptions.HiddenDefaultCmd = true
	root.SetHelpFunc(printHelp)
	root.SetHelpCommand(newHelp())
	root.Version = fmt.Sprintf("%s (GDAL %s)", toolVersion(), raster.GDALVersion())
	root.SetFlagErrorFunc(flagError)
	root.AddCommand(newLayers(command), newSweep(command), newSites(command), newLooks(), newInspect(), newDemo(), newVersion(), newMan())
	return root
}

// noSuchCommand refuses what is no command, with the nearest one.
func noSuchCommand(cmd *cobra.Command, args []string) error {
	if len(args) == 0 {
		return nil
	}
	var known []string
	for _, c := range cmd.Commands() {
		if c.IsAvailableCommand() {
			known = append(known, c.Name())
		}
	}
	return hint(usagef("unknown command %q; the commands are %s", args[0], strings.Join(known, ", ")),
		didYouMean("", args[0], known))
}

// flagError rewrites what the flag parser says: the flag by name, what was
// found, what is accepted, the nearest known flag.
func flagError(cmd *cobra.Command, err error) error {
	seeHelp := fmt.Sprintf("see `%s --help`", cmd.CommandPath())
	var value *pflag.InvalidValueError
	var unknown *pflag.NotExistError
	var missing *pflag.ValueRequiredError
	switch {
	case errors.As(err, &value):
		return hint(usagef("--%s %q: %w", value.GetFlag().Name, value.GetValue(), value.Unwrap()), seeHelp)
	case errors.As(err, &unknown):
		var known []string
		cmd.Flags().VisitAll(func(f *pflag.Flag) { known = append(known, f.Name) })
		name := unknown.GetSpecifiedName()
		if next := didYouMean("--", name, known); next != "" {
			seeHelp = next
		}
		if len([]rune(name)) == 1 {
			return hint(usagef("unknown flag -%s of %s; a negative number takes an equals sign, as in --ceiling=-5", name, cmd.CommandPath()), seeHelp)
		}
		return hint(usagef("unknown flag --%s of %s", name, cmd.CommandPath()), seeHelp)
	case errors.As(err, &missing):
		return hint(usagef("--%s: needs a value", missing.GetFlag().Name), seeHelp)
	default:
		return hint(usagef("%w", err), seeHelp)
	}
}

// exactly returns a check for the number of arguments that are no flags.
func exactly(names ...string) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		usage := "usage: " + cmd.UseLine()
		switch {
		case len(args) < len(names):
			return hint(usagef("%s: %s is missing", cmd.Name(), names[len(args)]), usage)
		case len(args) > len(names):
			return hint(usagef("%s: unexpected argument %q", cmd.Name(), args[len(names)]), usage)
		}
		return nil
	}
}

// didYouMean returns a question with the known name nearest to a word, or
// nothing when none is near: at most a third of its letters differ, or two.
func didYouMean(prefix, word string, known []string) string {
	best, least := "", max(3, len(word)/3+1)
	for _, k := range known {
		if d := geometry.EditDistance(strings.ToLower(word), k); d < least {
			best, least = k, d
		}
	}
	if best == "" {
		return ""
	}
	return fmt.Sprintf("did you mean %s%s?", prefix, best)
}
