package main

import (
	"bufio"
	"errors"
	"flag"
	"fmt"
	"os"
	"strings"

	"fluxwarden/cmd/fluxwarden/console"
)

// cmdPeople keeps the file of who may sign in to the console.
func cmdPeople(args []string) int {
	fs := flag.NewFlagSet("people", flag.ContinueOnError)
	file := fs.String("file", "", "file of people, as settings name it (console: people)")
	fs.Usage = func() {
		fmt.Fprint(os.Stderr, "example: fluxwarden people --file people.yaml add anna      (the password is read from the first line of standard input)\n"+
			"         fluxwarden people --file people.yaml remove anna\n         fluxwarden people --file people.yaml list\n\n")
		fs.PrintDefaults()
	}
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	verb, name := fs.Arg(0), fs.Arg(1)
	if *file == "" || verb != "add" && verb != "remove" && verb != "list" || (verb == "list") != (fs.NArg() == 1) || fs.NArg() > 2 {
		return complain(exitUsage, errors.New("people: want --file FILE and add NAME, remove NAME or list"))
	}
	people, err := console.ReadPeople(*file)
	if err != nil {
		return complain(exitProblem, err)
	}
	switch verb {
	case "list":
		for _, p := range people.People {
			fmt.Println(p.Name)
		}
		return exitOK
	case "remove":
		if !people.Remove(name) {
			return complain(exitProblem, fmt.Errorf("people: nobody is called %q", name))
		}
	case "add":
		fmt.Fprintf(os.Stderr, "password for %s: ", name)
		line, err := bufio.NewReader(os.Stdin).ReadString('\n')
		if err != nil && line == "" {
			return complain(exitUsage, errors.New("people: no password came; write one line to standard input"))
		}
		if err := people.Set(name, strings.TrimRight(line, "\r\n")); err != nil {
			return complain(exitUsage, err)
		}
	}
	if err := people.Write(*file); err != nil {
		return complain(exitProblem, err)
	}
	return exitOK
}
