// Penwright takes a trial folder, checks it, draws and keeps its randomization, analyses
// it by the error term its units dictate, and writes a self-contained report.
package main

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"runtime"
	"strings"
	"time"

	"github.com/spf13/cobra"
	"golang.org/x/term"

	"penwright/analysis/result"
	"penwright/protocol/diag"
	"penwright/render/face"
	"penwright/templates"
)

// version is raised with every change of output.
const version = "0.2.0"

// topicTemplates is what help tells about beside the commands.
const topicTemplates = "templates"

// Exit statuses.
const (
	fine     = 0
	findings = 1 // the input has errors
	misuse   = 2
	broken   = 3 // a file that cannot be read or written, or a fault of the program
)

// app is what every verb has at hand: the streams, the clock, the settings.
type app struct {
	in       io.Reader
	out, err io.Writer
	now      func() time.Time
	getenv   func(string) string

	terminal bool // standard error is a terminal
	width    int  // of the terminal of standard output
	quiet    bool
	color    string
	licences bool

	step func(name string) // told each step of a write, so that tests can stop there; nil otherwise
}

func main() { os.Exit(run(os.Args[1:], os.Stdin, os.Stdout, os.Stderr)) }

// run carries out one command line and gives the exit status.
func run(args []string, stdin io.Reader, stdout, stderr io.Writer) (code int) {
	return (&app{in: stdin, out: stdout, err: stderr, now: time.Now, getenv: os.Getenv, width: 80}).run(args)
}

func (a *app) run(args []string) (code int) {
	stdin, stdout, stderr := a.in, a.out, a.err
	if f, ok := stderr.(*os.File); ok {
		a.terminal = term.IsTerminal(int(f.Fd()))
	}
	if f, ok := stdout.(*os.File); ok {
		if w, _, err := term.GetSize(int(f.Fd())); err == nil && w > 40 {
			a.width = min(w, 140)
		}
	}
	defer func() {
		if x := recover(); x != nil {
			fmt.Fprintf(stderr, "penwright: a fault of the program: %v\n", x)
			fmt.Fprintln(stderr, "nothing was written by the step that failed; please report the command and the protocol")
			code = broken
		}
	}()
	root := a.root()
	root.SetArgs(args)
	root.SetIn(stdin)
	root.SetOut(stdout)
	root.SetErr(stderr)
	err := root.Execute()
	var s status
	switch {
	case err == nil:
		return fine
	case errors.As(err, &s):
		if s.err != nil {
			fmt.Fprintf(stderr, "penwright: %v\n", s.err)
		}
		return s.code
	}
	fmt.Fprintf(stderr, "penwright: %v\nhint: penwright help lists the commands\n", err)
	return misuse
}

// status is an error that bears the exit status; a nil err was already reported.
type status struct {
	code int
	err  error
}

func (s status) Error() string {
	if s.err != nil {
		return s.err.Error()
	}
	return fmt.Sprintf("exit status %d", s.code)
}

func (s status) Unwrap() error { return s.err }

func failed(err error) error { return status{code: broken, err: err} }

const help = `{{with or .Long .Short}}{{. | trimTrailingWhitespaces}}

{{end}}{{if .Runnable}}usage: {{.UseLine}}
{{end}}{{if .HasAvailableSubCommands}}usage: {{.CommandPath}} COMMAND [TRIAL]

TRIAL is a trial folder (default: the one you are in) or its protocol.toml.

commands:
{{range .Commands}}{{if .IsAvailableCommand}}  {{rpad .Name .NamePadding}} {{.Short}}
{{end}}{{end}}{{end}}{{if .HasAvailableLocalFlags}}
flags:
{{.LocalFlags.FlagUsages | trimTrailingWhitespaces}}
{{end}}{{if .HasExample}}
example:
{{.Example}}
{{end}}{{if .HasAvailableSubCommands}}
penwright help COMMAND tells more about one of them; penwright help templates tells what
report templates and an author’s own words in a report can say.
exit status: 0 fine or warnings only; 1 the input has errors; 2 wrong use; 3 a file
that cannot be read or written, or a fault of the program.
{{end}}`

func (a *app) root() *cobra.Command {
	root := &cobra.Command{
		Use:           "penwright",
		Short:         "Design, draw, analyse and report trials with animals and field plots",
		SilenceErrors: true,
		SilenceUsage:  true,
		Args: func(cmd *cobra.Command, args []string) error {
			if len(args) > 0 {
				names := []string{}
				for _, c := range cmd.Commands() {
					names = append(names, c.Name())
				}
				if near := diag.Nearest(args[0], names); near != "" {
					return fmt.Errorf("there is no command %q; did you mean %q?", args[0], near)
				}
				return fmt.Errorf("there is no command %q", args[0])
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, _ []string) error {
			if a.licences {
				fmt.Fprintln(a.out, face.Licences())
				return nil
			}
			return cmd.Help()
		},
		Version: version + " " + runtime.Version() + " " + runtime.GOOS + "/" + runtime.GOARCH,
	}
	root.SetVersionTemplate("penwright {{.Version}}\n")
	root.SetHelpTemplate(help)
	root.SetUsageTemplate(help)
	root.CompletionOptions.DisableDefaultCmd = true
	root.PersistentFlags().BoolVar(&a.quiet, "quiet", false, "say nothing on standard error but faults")
	root.PersistentFlags().StringVar(&a.color, "color", "auto", "colour of messages: auto, always or never")
	root.Flags().BoolVar(&a.licences, "licences", false, "print the licences of the embedded faces")
	root.PersistentPreRunE = func(*cobra.Command, []string) error {
		if a.color != "auto" && a.color != "always" && a.color != "never" {
			return fmt.Errorf("unknown --color %q: auto, always or never", a.color)
		}
		return nil
	}
	root.AddCommand(a.demo(), a.new(), a.check(), a.size(), a.draw(), a.sheets(), a.seal(), a.changes(), a.analyze(), a.report())
	root.SetHelpCommand(&cobra.Command{
		Use: "help [COMMAND]", Short: "tells more about a command, or about templates", Args: cobra.ArbitraryArgs,
		RunE: func(cmd *cobra.Command, args []string) error {
			if len(args) == 1 && args[0] == topicTemplates {
				page, err := fs.ReadFile(templates.FS, "functions.md")
				if err != nil {
					panic("main: the page on templates cannot be read")
				}
				_, err = a.out.Write(page)
				return err
			}
			c, rest, err := cmd.Root().Find(args)
			if err != nil || len(rest) > 0 && c == cmd.Root() {
				known := []string{topicTemplates}
				for _, c := range cmd.Root().Commands() {
					known = append(known, c.Name())
				}
				if near := diag.Nearest(strings.Join(args, " "), known); near != "" {
					return fmt.Errorf("there is no command or topic %q; did you mean %q?", strings.Join(args, " "), near)
				}
				return fmt.Errorf("there is no command %q", strings.Join(args, " "))
			}
			return c.Help()
		},
	})
	return root
}

// one allows a single argument, or none.
func one(what string) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		if len(args) > 1 {
			return fmt.Errorf("%s takes one %s, not %d: %s", cmd.Name(), what, len(args), strings.Join(args, " "))
		}
		return nil
	}
}

// colourful tells whether messages are coloured.
func (a *app) colourful() bool {
	switch a.color {
	case "always":
		return true
	case "never":
		return false
	}
	return a.terminal && a.getenv("NO_COLOR") == ""
}

// say tells a person what was done.
func (a *app) say(format string, args ...any) {
	if !a.quiet {
		fmt.Fprintf(a.err, format+"\n", args...)
	}
}

func program() result.Program { return result.Program{Name: "penwright", Version: version} }

// progress overwrites one line of the terminal; an empty format clears it.
func (a *app) progress(format string, args ...any) {
	fmt.Fprintf(a.err, "\r\x1b[K"+format, args...)
}
