package main

import (
	"context"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"os"
	"strconv"
	"text/tabwriter"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/ingest/wire"
)

const refusedUsage = `example: fluxwarden refused list --broker nats://127.0.0.1:4222 --station northmoor

  list               what was refused, oldest first
  show NUMBER        one of them with its bytes
  requeue NUMBER...  send them through the front door again; what is taken leaves the list

`

// cmdRefused lists, shows and requeues what the gate or the worker has refused.
func cmdRefused(args []string) int {
	fs := flag.NewFlagSet("refused", flag.ContinueOnError)
	url := fs.String("broker", "nats://127.0.0.1:4222", "`url` of the broker")
	credentials := fs.String("credentials", "", "credentials `file`")
	station := fs.String("station", "", "list: only this station's")
	reason := fs.String("reason", "", "list: only this reason's")
	asJSON := fs.Bool("json", false, "one JSON object a line")
	wait := fs.Duration("wait", 10*time.Second, "how long to try")
	fs.Usage = func() { fmt.Fprint(os.Stderr, refusedUsage); fs.PrintDefaults() }
	if len(args) == 0 {
		fs.Usage()
		return exitUsage
	}
	verb := args[0]
	if err := fs.Parse(args[1:]); err != nil {
		return exitUsage
	}
	if verb != "list" && verb != "show" && verb != "requeue" {
		fs.Usage()
		return complain(exitUsage, fmt.Errorf("refused: no command %q; there are list, show and requeue", verb))
	}
	numbers, err := sequences(fs.Args())
	if err == nil && verb == "list" != (len(numbers) == 0) {
		err = errors.New("list takes no number, show and requeue take those that list prints")
	}
	if err != nil {
		return complain(exitUsage, fmt.Errorf("refused %s: %w", verb, err))
	}
	ctx, cancel := context.WithTimeout(context.Background(), *wait)
	defer cancel()
	r, b, err := openRefused(ctx, *url, *credentials)
	if err != nil {
		return complain(exitProblem, err)
	}
	defer b.Close()
	switch verb {
	case "list":
		err = listRefused(ctx, r, *station, *reason, *asJSON)
	case "show":
		err = showRefused(ctx, r, numbers, *asJSON)
	case "requeue":
		err = requeueRefused(ctx, r, numbers)
	}
	if err != nil {
		return complain(exitProblem, err)
	}
	return exitOK
}

func sequences(args []string) ([]uint64, error) {
	var numbers []uint64
	for _, a := range args {
		n, err := strconv.ParseUint(a, 10, 64)
		if err != nil || n == 0 {
			return nil, fmt.Errorf("%q is not a number of the list", a)
		}
		numbers = append(numbers, n)
	}
	return numbers, nil
}

func openRefused(ctx context.Context, url, credentials string) (*gate.RefusedStream, *broker.Broker, error) {
	up := make(chan struct{}, 1)
	b, err := broker.Connect(broker.ConnectSettings{URL: url, Credentials: credentials, Name: "fluxwarden refused", OnState: func(s broker.State) {
		if s.Connected {
			select {
			case up <- struct{}{}:
			default:
			}
		}
	}})
	if err != nil {
		return nil, nil, err
	}
	select {
	case <-up:
	case <-ctx.Done():
		b.Close()
		return nil, nil, fmt.Errorf("broker %s: does not answer; is it running, and is the address right", url)
	}
	r, err := gate.OpenRefused(ctx, b)
	if err != nil {
		b.Close()
		return nil, nil, err
	}
	return r, b, nil
}

func listRefused(ctx context.Context, r *gate.RefusedStream, station, reason string, asJSON bool) error {
	w := tabwriter.NewWriter(os.Stdout, 0, 4, 2, ' ', 0)
	enc := json.NewEncoder(os.Stdout)
	n := 0
	err := r.List(ctx, station, wire.Reason(reason), func(item gate.RefusedItem) bool {
		n++
		if asJSON {
			return enc.Encode(item) == nil
		}
		if n == 1 {
			fmt.Fprintln(w, "NUMBER\tRECEIVED\tSTATION\tREASON\tREADINGS\tBYTES\tDETAIL")
		}
		fmt.Fprintf(w, "%d\t%s\t%s\t%s\t%d\t%d\t%s\n", item.Seq, item.Received.UTC().Format(time.RFC3339), item.Station, item.Reason, item.Count, item.Bytes, item.Detail)
		return true
	})
	if err != nil {
		return err
	}
	if n == 0 {
		fmt.Fprintln(os.Stderr, "nothing is refused")
	}
	return w.Flush()
}

func showRefused(ctx context.Context, r *gate.RefusedStream, numbers []uint64, asJSON bool) error {
	for _, n := range numbers {
		item, err := r.Show(ctx, n)
		if err != nil {
			return err
		}
		if asJSON {
			if err := json.NewEncoder(os.Stdout).Encode(item); err != nil {
				return err
			}
			continue
		}
		fmt.Printf("number    %d\nstation   %s\nreceived  %s\nreason    %s\ndetail    %s\nreadings  %d\nbytes     %d\n\n%s\n", item.Seq, item.Station,
			item.Received.UTC().Format(time.RFC3339), item.Reason, item.Detail, item.Count, item.Bytes, item.Raw)
	}
	return nil
}

func requeueRefused(ctx context.Context, r *gate.RefusedStream, numbers []uint64) error {
	var bad error
	for _, n := range numbers {
		reply, err := r.Requeue(ctx, n)
		switch {
		case err != nil:
			bad = errors.Join(bad, err)
		case reply.OK:
			fmt.Printf("%d: taken, %d readings\n", n, reply.N)
		case reply.Retry:
			bad = errors.Join(bad, fmt.Errorf("requeue %d: not now (%s); try again later", n, reply.Reason))
		case len(reply.Refused) > 0:
			bad = errors.Join(bad, fmt.Errorf("requeue %d: refused again: %s: %s", n, reply.Refused[0].Reason, reply.Refused[0].Detail))
		default:
			bad = errors.Join(bad, fmt.Errorf("requeue %d: not taken", n))
		}
	}
	return bad
}
