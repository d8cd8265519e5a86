// Package cli is what people type: commands, help, exit status. It turns
// errors into one line on stderr and a number, and knows nothing of the work.
package cli

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"runtime"
	"runtime/debug"
	"slices"
	"strconv"
	"strings"
	"syscall"
	"time"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/progress"
)

const exitHelp = `
Exit status:
  0  done                            5  input missing or malformed
  1  a fault of the program          6  input or request not supported
  3  finished, some groups failed    7  nothing could be released
  4  bad settings                    8  output refused (exists, locked, disk full)
  130  interrupted

A map of recorded events can hurt people. Small numbers identify them, reporting
differs by place, and a smooth surface is no finding about a household. Local
codes, data-protection law and licensed practice come before this program.
`

// Main runs the program and returns its exit status.
func Main(args []string, stdout, stderr io.Writer) (status int) {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	app := &app{stdout: stdout, stderr: stderr}
	root := app.root()
	root.SetArgs(args)
	root.SetOut(stdout)
	root.SetErr(stderr)
	err := run(ctx, root.ExecuteContext)
	if err == nil {
		return exitDone
	}
	var panicked fault
	if errors.As(err, &panicked) {
		fmt.Fprintln(stderr, "drumlin: "+panicked.Error())
		return exitFault
	}
	status = exitStatus(err)
	app.json = app.json || wantsJSON(args)
	if ctx.Err() != nil {
		status, err = exitInterrupted, errors.New("interrupted; nothing half-written is left")
	}
	app.complain(err, status)
	return status
}

// wantsJSON looks for --json where the settings could not be read: a complaint
// about the command line or the settings file is a JSON line too.
func wantsJSON(args []string) bool {
	if on, err := strconv.ParseBool(os.Getenv(config.EnvPrefix + "_JSON")); err == nil && on {
		return true
	}
	return slices.Contains(args, "--json") || slices.Contains(args, "--json=true")
}

// grace is how long an interrupted run may take to end by itself; what it was
// writing takes itself away as soon as the context is cancelled.
const grace = 2 * time.Second

// run executes the command and, once interrupted, does not wait longer than
// the grace for a long computation to notice.
func run(ctx context.Context, execute func(context.Context) error) error {
	done := make(chan error, 1)
	go func() {
		defer func() {
			if p := recover(); p != nil {
				done <- fault{fmt.Sprintf("%v\n%s", p, debug.Stack())}
			}
		}()
		done <- execute(ctx)
	}()
	select {
	case err := <-done:
		return err
	case <-ctx.Done():
	}
	select {
	case err := <-done:
		return err
	case <-time.After(grace):
		return ctx.Err()
	}
}

// fault is a panic of the program, with its stack.
type fault struct{ text string }

func (f fault) Error() string { return "a fault of the program: " + f.text }

// app carries what commands share.
type app struct {
	stdout, stderr io.Writer
	json           bool
}

// complain says what went wrong in one line.
func (a *app) complain(err error, status int) {
	text := strings.Join(strings.Fields(err.Error()), " ")
	if a.json {
		b, jerr := json.Marshal(map[string]any{"type": "error", "exit_status": status, "message": text})
		if jerr == nil {
			fmt.Fprintf(a.stderr, "%s\n", b)
			return
		}
	}
	fmt.Fprintln(a.stderr, "drumlin: "+text)
}

func (a *app) root() *cobra.Command {
	root := &cobra.Command{
		Use:   "drumlin",
		Short: "Map where recorded events concentrate, with a bandwidth that can be defended",
		Long: `drumlin reads event extracts (Parquet or CSV files with one row per event),
estimates how densely events lie in the plane with a full bandwidth matrix
chosen from the data, and writes polygons: regions that hold a stated share of
events, bands of equal intensity, and peaks with their standard error and the
amount by which smoothing lowers them.`,
		Example: `  drumlin demo --out demo
  drumlin map callouts.parquet --out map
  drumlin map 'extracts/*.parquet' --x long --y lat --crs EPSG:4326 --out map`,
		SilenceUsage: true, SilenceErrors: true,
		CompletionOptions: cobra.CompletionOptions{HiddenDefaultCmd: true},
	}
	root.SetFlagErrorFunc(func(c *cobra.Command, err error) error {
		return fmt.Errorf("%w: %w; see drumlin %s --help", errUsage, err, c.Name())
	})
	root.SetHelpTemplate(root.HelpTemplate() + exitHelp)
	root.AddCommand(a.mapCommand(), a.bandwidthCommand(), a.evaluateCommand(), a.demoCommand(), a.versionCommand())
	for _, c := range root.Commands() {
		c.Args = usageArgs(c.Args)
	}
	root.Args = usageArgs(cobra.NoArgs)
	root.RunE = func(c *cobra.Command, _ []string) error { return c.Help() }
	return root
}

// usageArgs marks complaints about arguments as bad settings.
func usageArgs(check cobra.PositionalArgs) cobra.PositionalArgs {
	return func(c *cobra.Command, args []string) error {
		if check == nil {
			return nil
		}
		if err := check(c, args); err != nil {
			return fmt.Errorf("%w: %w; see drumlin --help", errUsage, err)
		}
		return nil
	}
}

// reporter returns the progress reporter that fits the output and the flags.
func (a *app) reporter(quiet, asJSON bool) *progress.Reporter {
	mode := progress.Silent
	switch f, ok := a.stderr.(*os.File); {
	case asJSON:
		mode = progress.JSON
	case !quiet && ok && term.IsTerminal(int(f.Fd())) && os.Getenv("TERM") != "dumb":
		mode = progress.Terminal
	}
	return progress.New(a.stderr, mode)
}

func (a *app) versionCommand() *cobra.Command {
	return &cobra.Command{
		Use: "version", Short: "Say what this program was built from", Args: cobra.NoArgs,
		RunE: func(*cobra.Command, []string) error {
			fmt.Fprintf(a.stdout, "drumlin %s, %s, %s/%s\n", version(), runtime.Version(), runtime.GOOS, runtime.GOARCH)
			if b, ok := debug.ReadBuildInfo(); ok {
				for _, d := range b.Deps {
					fmt.Fprintf(a.stdout, "  %s %s\n", d.Path, d.Version)
				}
			}
			return nil
		},
	}
}
