// Package command is Evenshelf's command line: it reads the configuration, wires the rooms together and
// prints results for people and for programs.
package command

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"os/signal"
	"path/filepath"
	"runtime"
	"syscall"

	"github.com/alecthomas/kong"

	"evenshelf/engine/level"
	"evenshelf/engine/media"
)

// Exit codes.
const (
	exitFine  = 0
	exitSome  = 1 // the work was done, but not for every file
	exitUsage = 2
)

// Version of the program; release builds set it with -ldflags -X.
var Version = "0.1.0"

// cli is every command with its options. Each option can also be given in the environment, as
// EVENSHELF_ and its name in capitals, and in the TOML file named by --config, under its own name.
type cli struct {
	Config     kong.ConfigFlag `help:"TOML file with options, under the names they have here." placeholder:"FILE" type:"existingfile"`
	Data       string          `help:"Folder for the database and delivered copies (default: ${data})." default:"${data}" placeholder:"DIR" type:"path"`
	Workers    int             `help:"How many recordings to work on at once (0: one a processor)." default:"0"`
	FFmpeg     string          `name:"ffmpeg" help:"The ffmpeg program to decode and encode with; 'none' to do without." placeholder:"FILE"`
	ProfileDir string          `name:"profiles" help:"Folder with profiles of your own, NAME.toml each (default: profiles in the data folder)." placeholder:"DIR" type:"path"`
	LogLevel   slog.Level      `help:"How much to log: debug, info, warn or error." default:"info"`

	Serve    serveCmd    `cmd:"" help:"Run the server: the dashboard, the HTTP API and the queue."`
	Measure  measureCmd  `cmd:"" help:"Measure recordings and print their loudness, range, peaks, speech and faults. Nothing is written."`
	Level    levelCmd    `cmd:"" help:"Make levelled copies of recordings in another folder, or write only gain tags into them. Originals are not touched, or kept."`
	Runs     runsCmd     `cmd:"" help:"List the runs of a server, or show one run with its recordings."`
	Restore  restoreCmd  `cmd:"" help:"Bring originals back from the attic after a run that replaced them."`
	Profiles profilesCmd `cmd:"" help:"List the levelling profiles, show one in words, check files with profiles of your own."`
	Try      tryCmd      `cmd:"" help:"See it work: make a demo shelf, level it and open the dashboard."`
	Version  versionCmd  `cmd:"" help:"Print the version."`
}

// app is what every command is handed.
type app struct {
	*cli
	ctx    context.Context
	stdout io.Writer
	stderr io.Writer
	log    *slog.Logger
}

// statusError carries an exit code that is not an error message's.
type statusError int

func (s statusError) Error() string { return fmt.Sprintf("exit status %d", int(s)) }

func newParser(c *cli, stdout, stderr io.Writer, exit func(int)) (*kong.Kong, error) {
	return kong.New(c,
		kong.Name("evenshelf"),
		kong.Description("Brings shelves full of recordings to one loudness, and keeps the originals safe."),
		kong.Writers(stdout, stderr),
		kong.Exit(exit),
		kong.DefaultEnvars("EVENSHELF"),
		kong.Configuration(tomlResolver),
		kong.ConfigureHelp(kong.HelpOptions{Compact: true}),
		kong.Vars{"data": dataFolder(), "server": defaultServer},
	)
}

// Run reads args, does what they say and returns the exit code: 0 when all went well, 1 when some
// recordings did not, 2 when the command line could not be understood.
func Run(ctx context.Context, args []string, stdout, stderr io.Writer) int {
	var c cli
	exit := -1
	parser, err := newParser(&c, stdout, stderr, func(code int) { exit = code })
	if err != nil {
		fmt.Fprintln(stderr, "evenshelf:", err)
		return exitUsage
	}
	parsed, err := parser.Parse(args)
	if exit >= 0 { // --help has been printed
		return exit
	}
	if err != nil {
		fmt.Fprintf(stderr, "evenshelf: %s\nTry: evenshelf --help\n", oneLine(err))
		return exitUsage
	}
	ctx, stop := context.WithCancelCause(ctx)
	defer stop(nil)
	signal.Notify(make(chan os.Signal, 1), syscall.SIGPIPE) // a write fails then, instead of ending the program on the spot
	a := &app{cli: &c, ctx: ctx, stdout: heard{stdout, stop}, stderr: stderr,
		log: slog.New(slog.NewTextHandler(stderr, &slog.HandlerOptions{Level: c.LogLevel}))}
	err = parsed.Run(a)
	var status statusError
	switch {
	case err == nil:
		return exitFine
	case errors.As(err, &status):
		return int(status)
	case errors.As(err, new(usageError)):
		fmt.Fprintln(stderr, "evenshelf:", oneLine(err))
		return exitUsage
	default:
		fmt.Fprintln(stderr, "evenshelf:", oneLine(err))
		return exitSome
	}
}

// heard is an output that stops the work once nobody reads it any more ("| head -1"), so that what is at work
// can put its things away.
type heard struct {
	io.Writer
	stop context.CancelCauseFunc
}

func (h heard) Write(b []byte) (int, error) {
	n, err := h.Writer.Write(b)
	if err != nil {
		h.stop(fmt.Errorf("the output cannot be written: %w", err))
	}
	return n, err
}

// usageError is a command line that was understood but cannot be meant.
type usageError string

func (u usageError) Error() string { return string(u) }

func (a *app) engine() (*level.Engine, error) {
	switch a.FFmpeg {
	case "":
		return &level.Engine{Media: media.Find()}, nil
	case "none":
		return &level.Engine{Media: media.New("")}, nil
	}
	if _, err := os.Stat(a.FFmpeg); err != nil {
		return nil, fmt.Errorf("--ffmpeg: %w", err)
	}
	tools := media.New(a.FFmpeg)
	if tools.FFmpeg() == "" {
		return nil, fmt.Errorf("--ffmpeg: %s cannot be run, or has no ffprobe", a.FFmpeg)
	}
	return &level.Engine{Media: tools}, nil
}

// workers is how many recordings are worked on at once. One recording takes a decoder, a meter and a search for
// faults and speech, which wait for each other, so one a processor is what it takes to keep all of them busy, and more
// gains little: with 4 FLAC and 4 MP3 files on two processors, one at a time took 1.4 times as long as two, and four
// at a time 0.97 times, for twice the FFmpeg processes. The processor time was the same for all.
func (a *app) workers() int {
	if a.Workers > 0 {
		return a.Workers
	}
	return runtime.GOMAXPROCS(0)
}

// dataFolder is evenshelf's own folder among the user's data (XDG Base Directory Specification).
func dataFolder() string {
	if dir := os.Getenv("XDG_DATA_HOME"); filepath.IsAbs(dir) {
		return filepath.Join(dir, "evenshelf")
	}
	if home, err := os.UserHomeDir(); err == nil {
		return filepath.Join(home, ".local", "share", "evenshelf")
	}
	return "evenshelf-data"
}
