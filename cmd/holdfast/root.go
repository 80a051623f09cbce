package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strconv"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/pflag"
)

// program holds what every command needs: the streams, the signals, and the
// words that were typed. Data goes to out, talk to err.
type program struct {
	out, err io.Writer
	signals  *watch
	typed    []string // arguments, without the program's name
	told     []string // notes on a decision that were said already
}

// run is the whole program: it runs the command that args name and returns
// the exit code.
func run(args []string, stdout, stderr io.Writer) int {
	signals, ctx, end := watchSignals(stderr)
	defer end()
	p := &program{out: stdout, err: stderr, signals: signals, typed: args}
	root := p.root()
	root.SetArgs(args)
	root.SetOut(stdout)
	root.SetErr(stderr)
	return p.finish(ctx, root.ExecuteContext(ctx))
}

const helpTemplate = `{{with (or .Long .Short)}}{{. | trimTrailingWhitespaces}}

{{end}}Usage:
  {{if .HasAvailableSubCommands}}{{.CommandPath}} COMMAND{{else}}{{.UseLine}}{{end}}
{{if .HasAvailableSubCommands}}
Commands:{{range .Commands}}{{if .IsAvailableCommand}}
  {{rpad .Name .NamePadding}} {{.Short}}{{end}}{{end}}

"holdfast COMMAND --help" says more about a command.

Exit codes:
  0    done
  1    failed
  2    the command, the study or the table is wrong
  3    finished, but something is missing or not certified
  130  interrupted (143 for SIGTERM)
{{end}}{{if .HasAvailableLocalFlags}}
Options:
{{.LocalFlags.FlagUsages | trimTrailingWhitespaces}}
{{end}}{{if .HasExample}}
Example{{with .Annotations.after}}, after {{.}}{{end}}:
{{.Example}}
{{end}}`

// root builds the command tree. The commands of a first visit come first.
func (p *program) root() *cobra.Command {
	cobra.EnableCommandSorting = false
	root := &cobra.Command{
		Use:   "holdfast",
		Short: "Which predictors of a wide table are reliably chosen, and how many could be there by luck",
		Long: `holdfast reruns a penalised regression over hundreds of random draws of the rows
of a table, counts how often each predictor is chosen, and states a bound on
the number of false selections.`,
		Example:       "  holdfast demo",
		Version:       version(),
		SilenceErrors: true,
		SilenceUsage:  true,
		Args:          knownCommand,
		RunE: func(c *cobra.Command, _ []string) error {
			return misuse("holdfast: which command?", "holdfast --help lists them; holdfast demo shows the whole job")
		},
	}
	root.SetHelpTemplate(helpTemplate)
	root.SetVersionTemplate("holdfast {{.Version}}\n")
	root.SuggestionsMinimumDistance = 2
	root.CompletionOptions.DisableDefaultCmd = true
	root.SetFlagErrorFunc(func(c *cobra.Command, err error) error {
		return misuse(c.CommandPath()+": "+flagFault(err), c.CommandPath()+" --help lists the options")
	})
	root.SetHelpCommand(p.helpCommand())
	root.AddCommand(p.demoCommand(), p.draftCommand(), p.planCommand(), p.runCommand(), p.judgeCommand(), p.statusCommand(),
		p.inspectCommand(), p.budgetCommand(), p.fitCommand(), p.rowsCommand(), p.dealCommand())
	for _, c := range root.Commands() {
		c.Flags().SortFlags = false
		if strings.Contains(c.Example, " demo/") {
			c.Annotations = map[string]string{"after": "holdfast demo"}
		}
		c.DisableFlagsInUseLine = true
	}
	return root
}

// helpCommand is `holdfast help [COMMAND]`; the library's own says nothing
// and exits 0 for a command that is not there.
func (p *program) helpCommand() *cobra.Command {
	return &cobra.Command{
		Use:    "help [COMMAND]",
		Short:  "Help on a command",
		Hidden: true,
		RunE: func(c *cobra.Command, args []string) error {
			about, rest, err := c.Root().Find(args)
			if err != nil || len(rest) > 0 {
				return unknownCommand(c.Root(), args[0])
			}
			about.InitDefaultHelpFlag()
			return about.Help()
		},
	}
}

// knownCommand refuses words after holdfast that are no command.
func knownCommand(c *cobra.Command, args []string) error {
	if len(args) == 0 {
		return nil
	}
	return unknownCommand(c, args[0])
}

func unknownCommand(root *cobra.Command, word string) error {
	hint := "holdfast --help lists the commands"
	if near := root.SuggestionsFor(word); len(near) > 0 {
		hint = "nearest: holdfast " + strings.Join(near, ", holdfast ")
	}
	return misuse(fmt.Sprintf("holdfast: no command %q", word), hint)
}

// flagFault says what is wrong with an option, without the words of the
// library that parses numbers.
func flagFault(err error) string {
	var e *pflag.InvalidValueError
	if !errors.As(err, &e) {
		return err.Error()
	}
	why := errors.Unwrap(err)
	switch {
	case errors.Is(err, strconv.ErrRange):
		why = errors.New("is too large")
	case e.GetFlag().Value.Type() == "int":
		why = errors.New("is not a whole number")
	default:
		return fmt.Sprintf("--%s: %v", e.GetFlag().Name, why)
	}
	return fmt.Sprintf("--%s: %q %v", e.GetFlag().Name, e.GetValue(), why)
}

// exactly returns a check that n arguments named in words are there.
func exactly(words ...string) cobra.PositionalArgs {
	return between(len(words), words...)
}

// between returns a check that at least least of the arguments named in words
// are there, and no more than all.
func between(least int, words ...string) cobra.PositionalArgs {
	return func(c *cobra.Command, args []string) error {
		switch {
		case len(args) < least:
			return misuse(fmt.Sprintf("%s: %s is missing", c.CommandPath(), words[len(args)]), "usage: "+c.UseLine())
		case len(args) > len(words):
			return misuse(fmt.Sprintf("%s: %q is one argument too many", c.CommandPath(), args[len(words)]), "usage: "+c.UseLine())
		}
		return nil
	}
}

// action adapts a method of the program to the command library.
func action(f func(ctx context.Context, args []string) error) func(*cobra.Command, []string) error {
	return func(c *cobra.Command, args []string) error { return f(c.Context(), args) }
}
