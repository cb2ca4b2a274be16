package main

import (
	"errors"
	"flag"
	"fmt"
	"strings"
)

// flagSet is a flag.FlagSet that takes flags before and after the arguments and prints to the command's environment.
type flagSet struct {
	*flag.FlagSet
	env *environment
	// usage is what follows "limitary" in the first line of the help; about is the paragraph below it.
	usage, about string
}

// newFlags makes the flags of a command. Usage is the call's form, such as "post [flags] FILE".
func newFlags(env *environment, usage, about string) *flagSet {
	f := &flagSet{FlagSet: flag.NewFlagSet("limitary", flag.ContinueOnError), env: env, usage: usage, about: about}
	f.SetOutput(env.Stderr)
	f.FlagSet.Usage = func() {} // printed by parse, once it is known where to
	return f
}

// parse reads the arguments. Where done is true the command ends with the code: help was asked for, or a flag is wrong.
func (f *flagSet) parse(args []string, argsMin, argsMax int) (rest []string, code int, done bool) {
	for len(args) > 0 {
		if err := f.FlagSet.Parse(args); err != nil {
			if errors.Is(err, flag.ErrHelp) {
				f.SetOutput(f.env.Stdout)
				f.help()
				return nil, exitOK, true
			}
			f.help() // the flag package has told what is wrong
			return nil, exitUsage, true
		}
		left := f.Args()
		if n := len(args) - len(left); n > 0 && args[n-1] == "--" {
			rest, args = append(rest, left...), nil
			break
		}
		if len(left) == 0 {
			break
		}
		rest, args = append(rest, left[0]), left[1:]
	}
	switch {
	case len(rest) < argsMin:
		return nil, f.wrong("an argument is missing"), true
	case argsMax >= 0 && len(rest) > argsMax:
		return nil, f.wrong("%q is one argument too many", rest[argsMax]), true
	}
	return rest, exitOK, false
}

// wrong says what is wrong with the call, prints the help and gives the exit code.
func (f *flagSet) wrong(format string, args ...any) int {
	fmt.Fprintf(f.env.Stderr, "limitary: "+format+"\n\n", args...)
	f.help()
	return exitUsage
}

func (f *flagSet) help() {
	fmt.Fprintf(f.Output(), "usage: limitary %s\n", f.usage)
	if f.about != "" {
		fmt.Fprintf(f.Output(), "\n%s\n", f.about)
	}
	title := "\nflags:\n"
	f.VisitAll(func(each *flag.Flag) {
		value, about := flag.UnquoteUsage(each)
		fmt.Fprintf(f.Output(), "%s  %s\n        %s", title, strings.TrimSpace("--"+each.Name+" "+value), about)
		title = ""
		// Where the text itself tells the default, or there is none to tell, nothing is added.
		if d := each.DefValue; d != "" && d != "false" && d != "0" && d != "-1" && d != "0s" && !strings.Contains(about, "(default") {
			fmt.Fprintf(f.Output(), " (default %s)", d)
		}
		fmt.Fprintln(f.Output())
	})
}

// fail prints a failure and gives the exit code.
func fail(env *environment, format string, args ...any) int {
	fmt.Fprintf(env.Stderr, "limitary: "+format+"\n", args...)
	return exitFailure
}
