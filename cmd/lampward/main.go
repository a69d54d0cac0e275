// Command lampward is the program: the service, the demo, and the tools beside them.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"os/signal"
	"runtime/debug"
	"syscall"
	"time"

	"github.com/alecthomas/kong"
)

// commands is what the program can do; every flag may also be given in the environment where its help says so.
type commands struct {
	Serve    serveCommand    `cmd:"" help:"Answer requests until interrupted."`
	Demo     demoCommand     `cmd:"" help:"Draw an invented estate, check it, show the worst and serve it."`
	Migrate  migrateCommand  `cmd:"" help:"Bring the schema of the database up to date, or take it back."`
	FitCheck fitCheckCommand `cmd:"" name:"fit-check" help:"May I fit this here? From what can be seen on a ladder; needs no database."`
	Check    checkCommand    `cmd:"" help:"Judge a file of records; needs no database."`
	Fit      fitCommand      `cmd:"" help:"Fit lives to a CSV file: the check of a statistician; needs no database."`
	Import   importCommand   `cmd:"" help:"Store a file of records."`
	Export   exportCommand   `cmd:"" help:"Write a building as the survey workbook, or an empty one."`
	Key      keyCommand      `cmd:"" help:"Make, list and withdraw API keys."`
	Audit    auditCommand    `cmd:"" help:"Recompute the audit chains."`
}

const about = `Lampward keeps the record of a building's lighting and checks it.

What it shows is a screening estimate from the record. Work on lighting can hurt people: isolate, lock off and prove
dead. Local codes and licensed practice decide.`

// streams are where a command reads and writes.
type streams struct {
	in       io.Reader
	out, err io.Writer
	terminal bool // out's sibling err is a terminal: progress may be drawn there
	log      *slog.Logger
	clock    func() time.Time
}

// exit is an error that only sets the status of the program: what there was to say has been said.
type exit int

func (e exit) Error() string { return fmt.Sprintf("exit status %d", int(e)) }

// main also has garbage collected less often while memory is plenty, since a full review forgets at once what it read:
// GOGC and GOMEMLIMIT, where set, decide instead.
func main() {
	if os.Getenv("GOGC") == "" {
		debug.SetGCPercent(400)
	}
	if os.Getenv("GOMEMLIMIT") == "" {
		debug.SetMemoryLimit(384 << 20)
	}
	os.Exit(run(os.Args[1:], os.Stdin, os.Stdout, os.Stderr))
}

// run is the program without its end: it returns the exit status. 0 is well, 1 is told per command, 2 is a use or an
// input that cannot be.
func run(args []string, in io.Reader, out, errOut io.Writer) int {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	s := &streams{in: in, out: out, err: errOut, terminal: isTerminal(errOut), clock: time.Now}
	s.log = slog.New(slog.NewJSONHandler(errOut, nil))
	var c commands
	status := -1
	parser, err := kong.New(&c, kong.Name("lampward"), kong.Description(about), kong.Writers(out, errOut), kong.UsageOnError(),
		kong.ConfigureHelp(kong.HelpOptions{Compact: true, Summary: false}), kong.Exit(func(code int) { status = code }),
		kong.BindTo(ctx, (*context.Context)(nil)), kong.Bind(s))
	if err != nil {
		fmt.Fprintln(errOut, "lampward:", err)
		return 2
	}
	if len(args) == 0 {
		args = []string{"--help"}
	}
	k, err := parser.Parse(args)
	if status >= 0 {
		return status // help was shown
	}
	if err != nil {
		fmt.Fprintln(errOut, "lampward:", err)
		return 2
	}
	err = k.Run()
	if code, ok := errors.AsType[exit](err); ok {
		return int(code)
	}
	if err != nil {
		fmt.Fprintln(errOut, "lampward:", err)
		return 2
	}
	return 0
}
