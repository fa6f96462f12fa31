// Command kneepoint reads the per-die electrical test data of a lot of wafers and
// writes a report of what failed, where and why. Each command is a short file of
// this package; the work is done in the rooms below it.
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
)

// Exit codes.
const (
	exitDone   = 0
	exitFailed = 1
	exitHold   = 3
)

// errHold ends a run that is done, but whose proposal is not a release; only
// with --fail-on-hold.
var errHold = errors.New("the proposal is not a release")

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	os.Exit(run(ctx, os.Args[1:], os.Stdout, os.Stderr))
}

// run executes one command line. Data go to stdout, messages to stderr.
func run(ctx context.Context, args []string, stdout, stderr io.Writer) int {
	root := newRoot()
	root.SetArgs(args)
	root.SetOut(stdout)
	root.SetErr(stderr)
	err := root.ExecuteContext(ctx)
	switch {
	case err == nil:
		return exitDone
	case errors.Is(err, errHold):
		return exitHold
	case errors.Is(err, context.Canceled):
		fmt.Fprintln(stderr, "error: interrupted; no report was written")
		return exitFailed
	}
	message(stderr, err)
	return exitFailed
}

// message prints an error, a line each problem.
func message(w io.Writer, err error) {
	for _, line := range strings.Split(strings.TrimRight(err.Error(), "\n"), "\n") {
		fmt.Fprintln(w, "error:", line)
	}
	var h hinted
	if errors.As(err, &h) {
		fmt.Fprintln(w, "hint:", h.hint)
	}
}

// hinted is an error with a word on what to try instead.
type hinted struct {
	error
	hint string
}

func (h hinted) Unwrap() error { return h.error }

func newRoot() *cobra.Command {
	root := &cobra.Command{
		Use:   "kneepoint",
		Short: "why did this wafer lot yield low?",
		Long: `kneepoint reads the per-die electrical test data of a lot of silicon wafers, works out how
much yield was lost, where on the wafers and on which tests, and writes a report.`,
		Example:       "  kneepoint demo\n  kneepoint triage lot.csv -p product.yaml -o out",
		SilenceUsage:  true,
		SilenceErrors: true,
		Args:          cobra.NoArgs,
		RunE:          func(c *cobra.Command, _ []string) error { return c.Help() },
	}
	root.CompletionOptions.HiddenDefaultCmd = true
	root.SetFlagErrorFunc(func(c *cobra.Command, err error) error {
		return hinted{err, fmt.Sprintf("see '%s --help'", c.CommandPath())}
	})
	root.AddCommand(newTriage(), newInspect(), newProduct(), newConvert(), newDemo(), newSynth(), newRehearse(), newVersion())
	return root
}

// needFiles asks for at least one file.
func needFiles(c *cobra.Command, args []string) error {
	if len(args) == 0 {
		return hinted{errors.New("no data file is named"), fmt.Sprintf("for example:%s", strings.SplitN(c.Example, "\n", 2)[0])}
	}
	return nil
}
