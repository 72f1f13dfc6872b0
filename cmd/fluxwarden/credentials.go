package main

import (
	"errors"
	"flag"
	"fmt"
	"io/fs"
	"os"
	"text/tabwriter"
	"time"

	"fluxwarden/ingest/broker"
)

const credentialsUsage = `example: fluxwarden credentials new --file credentials.yaml --station northmoor --out northmoor.secret

  new          make a credential; its secret is shown once, or written to --out
  list         who has one
  revoke NAME  end one; a running daemon cuts its connections within seconds

The file holds bcrypt hashes and public keys only. The daemon is told of it in its settings (access: credentials).

`

// cmdCredentials makes, lists and revokes credentials.
func cmdCredentials(args []string) int {
	flags := flag.NewFlagSet("credentials", flag.ContinueOnError)
	file := flags.String("file", "", "the `file` of credentials")
	station := flags.String("station", "", "new: the `station` that may send with it")
	role := flags.String("role", "station", "new: station, operator (everything, for those who run the daemon) or edge (joins a hub)")
	name := flags.String("name", "", "new: its `name`; made from the station without it")
	kind := flags.String("kind", "password", "new: password (NATS, MQTT, HTTP) or nkey (NATS only)")
	out := flags.String("out", "", "new: write the secret to this `file`, readable by its owner only")
	flags.Usage = func() { fmt.Fprint(os.Stderr, credentialsUsage); flags.PrintDefaults() }
	if len(args) == 0 {
		flags.Usage()
		return exitUsage
	}
	verb := args[0]
	if verb == "-h" || verb == "--help" {
		flags.Usage()
		return exitOK
	}
	if err := flags.Parse(args[1:]); err != nil {
		return parseCode(err)
	}
	if *file == "" {
		return complain(exitUsage, errors.New("credentials: name their file with --file"))
	}
	book, err := broker.ReadBook(*file)
	if errors.Is(err, fs.ErrNotExist) && verb == "new" {
		book, err = &broker.Book{}, nil
	}
	if err != nil {
		return complain(exitProblem, err)
	}
	switch verb {
	case "new":
		if *kind != "password" && *kind != "nkey" {
			return complain(exitUsage, fmt.Errorf("credentials new: kind %q: it is password or nkey", *kind))
		}
		err = newCredential(book, *file, broker.Credential{Name: *name, Role: broker.Role(*role), Station: *station}, *kind == "nkey", *out)
	case "list":
		err = listCredentials(book)
	case "revoke":
		if flags.NArg() != 1 {
			return complain(exitUsage, errors.New("credentials revoke: name one; fluxwarden credentials list shows the names"))
		}
		if err = book.Revoke(flags.Arg(0), time.Now()); err == nil {
			err = book.Write(*file)
		}
	default:
		flags.Usage()
		return complain(exitUsage, fmt.Errorf("credentials: no command %q; there are new, list and revoke", verb))
	}
	if err != nil {
		return complain(exitProblem, err)
	}
	return exitOK
}

// newCredential writes the secret first: a credential that nobody has is of no use, a secret that does not work does no harm.
func newCredential(book *broker.Book, file string, c broker.Credential, nkey bool, out string) error {
	secret, err := book.New(c, nkey, time.Now())
	if err != nil {
		return err
	}
	if out != "" {
		if err := secret.WriteSecret(out); err != nil {
			return err
		}
	}
	if err := book.Write(file); err != nil {
		return err
	}
	if out != "" {
		fmt.Printf("%s: its secret is in %s\n", secret.Name, out)
		return nil
	}
	fmt.Printf("name: %s\n", secret.Name)
	if secret.Seed != "" {
		fmt.Printf("seed: %s\n", secret.Seed)
		return nil
	}
	fmt.Printf("password: %s\n", secret.Password)
	return nil
}

func listCredentials(book *broker.Book) error {
	w := tabwriter.NewWriter(os.Stdout, 0, 4, 2, ' ', 0)
	fmt.Fprintln(w, "NAME\tROLE\tSTATION\tKIND\tCREATED\tREVOKED")
	for i := range book.Credentials {
		c := &book.Credentials[i]
		kind, revoked := "password", "-"
		if c.NKey != "" {
			kind = "nkey"
		}
		if !c.Revoked.IsZero() {
			revoked = c.Revoked.Format(time.RFC3339)
		}
		station := c.Station
		if station == "" {
			station = "-"
		}
		fmt.Fprintf(w, "%s\t%s\t%s\t%s\t%s\t%s\n", c.Name, c.Role, station, kind, c.Created.Format(time.RFC3339), revoked)
	}
	return w.Flush()
}
