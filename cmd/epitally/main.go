// Command epitally serves wafer maps, bin yield and growth records of an LED
// wafer fab from the files its stations write. Run "epitally help".
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

	"github.com/spf13/pflag"
)

// version is set at build time.
var version = "development"

// command is one thing the binary does. run gets what follows the command word.
type command struct {
	name  string
	short string
	run   func(ctx context.Context, c *console, args []string) error
}

// console is where a command writes: results to out, everything else to err.
type console struct {
	in       io.Reader
	out, err io.Writer
}

func commands() []command {
	return []command{
		{"serve", "serve pages and API, and load what lands in the drop folder", serve},
		{"load", "load files or folders by hand, or show what they would give (--dry-run)", load},
		{"demo", "grow an invented fab, load it through the drop folder and serve it", demo},
		{"spec check", "look for overlaps, gaps and other slips in a specification", specCheck},
		{"spec compare", "tell which dies change bins between two specifications, and what that is worth", specCompare},
		{"calc colour", "colour and efficiency of a spectrum, a chromaticity, or a peak and width", calcColour},
		{"calc peak-model", "fit how a recipe's dominant wavelength follows from its peak", calcPeakModel},
		{"calc summary", "summarise one column of a CSV file", calcSummary},
		{"doctor", "examine the database: what is wrong in it, and what to do", doctor},
		{"gallery", "write every page from canned data as files, without a database", gallery},
		{"health", "ask a running server whether it is ready", health},
		{"version", "print the version", printVersion},
	}
}

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	c := &console{in: os.Stdin, out: os.Stdout, err: os.Stderr}
	switch err := dispatch(ctx, c, os.Args[1:]); {
	case err == nil, errors.Is(err, pflag.ErrHelp):
	case errors.Is(err, errSaid):
		os.Exit(1)
	default:
		fmt.Fprintf(os.Stderr, "epitally: %v\n", err)
		os.Exit(1)
	}
}

// errSaid ends a command with status 1 when its output has said why already.
var errSaid = errors.New("said")

func dispatch(ctx context.Context, c *console, args []string) error {
	if len(args) == 0 || args[0] == "help" || args[0] == "--help" || args[0] == "-h" {
		return help(c.out)
	}
	for _, cmd := range commands() {
		words := strings.Fields(cmd.name)
		if len(args) >= len(words) && strings.Join(args[:len(words)], " ") == cmd.name {
			return cmd.run(ctx, c, args[len(words):])
		}
	}
	return fmt.Errorf("no command %q; \"epitally help\" lists them", strings.Join(args[:min(len(args), 2)], " "))
}

func help(w io.Writer) error {
	fmt.Fprint(w, "epitally: wafer maps and bin yield of an LED wafer fab\n\nUsage: epitally COMMAND [flags]; epitally COMMAND --help says more.\n\n")
	for _, cmd := range commands() {
		fmt.Fprintf(w, "  %-14s %s\n", cmd.name, cmd.short)
	}
	return nil
}

func printVersion(_ context.Context, c *console, _ []string) error {
	_, err := fmt.Fprintf(c.out, "epitally %s\n", version)
	return err
}
