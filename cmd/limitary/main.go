// Command limitary keeps the control limits of a group of laboratories and judges control results by them: the service,
// and the same computations at the command line without one.
//
// It exits with 0 where all went well, 1 where something failed or was refused, and 2 where it was called wrongly.
// Results go to standard output, everything else to standard error.
package main

import (
	"context"
	"fmt"
	"io"
	"os"
	"os/signal"
	"syscall"
	"time"
)

// Exit codes.
const (
	exitOK      = 0
	exitFailure = 1
	exitUsage   = 2
)

// environment is everything a command has of the world around it, so that tests can give it another one.
type environment struct {
	Stdin          io.Reader
	Stdout, Stderr io.Writer
	Getenv         func(string) string
	Now            func() time.Time
	// Interactive says that a person watches standard error, so that long work shows its progress.
	Interactive bool
}

// command is one word after "limitary".
type command struct {
	Name, Summary string
	Run           func(ctx context.Context, env *environment, args []string) int
}

func main() {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	env := &environment{
		Stdin: os.Stdin, Stdout: os.Stdout, Stderr: os.Stderr,
		Getenv: os.Getenv, Now: time.Now, Interactive: isTerminal(os.Stderr),
	}
	code := run(ctx, env, os.Args[1:])
	stop()
	os.Exit(code)
}

func isTerminal(f *os.File) bool {
	info, err := f.Stat()
	return err == nil && info.Mode()&os.ModeCharDevice != 0
}

// run finds the command and runs it.
func run(ctx context.Context, env *environment, args []string) int {
	if len(args) == 0 {
		printCommands(env.Stderr)
		return exitUsage
	}
	switch args[0] {
	case "help", "-h", "-help", "--help":
		printCommands(env.Stdout)
		return exitOK
	case "--version", "-version":
		args = []string{"version"}
	}
	for _, c := range commands() {
		if c.Name == args[0] {
			return c.Run(ctx, env, args[1:])
		}
	}
	fmt.Fprintf(env.Stderr, "limitary: there is no command %q\n\n", args[0])
	printCommands(env.Stderr)
	return exitUsage
}

func printCommands(w io.Writer) {
	fmt.Fprint(w, "usage: limitary COMMAND [flags] [arguments]\n\n")
	for _, c := range commands() {
		fmt.Fprintf(w, "  %-10s %s\n", c.Name, c.Summary)
	}
	fmt.Fprint(w, "\n\"limitary COMMAND --help\" tells more about a command.\n")
}
