package main

import (
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"net/http"
	"os"
	"strings"
	"time"

	"fluxwarden/cmd/fluxwarden/daemon"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// cmdStatus prints the morning sheet: what is wrong, the worst first, what to take along, and whether repairs have worked.
func cmdStatus(args []string) int {
	fs := flag.NewFlagSet("status", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of the archive")
	address := fs.String("daemon", "", "address of a running daemon's pages, such as http://127.0.0.1:9470, instead of an archive")
	station := fs.String("station", "", "one station; all of them otherwise")
	asJSON := fs.Bool("json", false, "print the sheet as JSON")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if (*archive == "") == (*address == "") || fs.NArg() > 0 {
		return complain(exitUsage, errors.New("status: want --archive DIR or --daemon URL [--station S] [--json]"))
	}
	var sheet daemon.Sheet
	var err error
	if *address != "" {
		sheet, err = askSheet(*address, *station)
	} else {
		sheet, err = sheetOf(*archive, *station)
	}
	if err == nil && *asJSON {
		enc := json.NewEncoder(os.Stdout)
		enc.SetEscapeHTML(false)
		err = enc.Encode(&sheet)
	} else if err == nil {
		err = sheet.Write(os.Stdout)
	}
	if err != nil {
		return complain(exitProblem, fmt.Errorf("status: %w", err))
	}
	return exitOK
}

// sheetOf makes the sheet from an archive.
func sheetOf(folder, station string) (daemon.Sheet, error) {
	sheet := daemon.Sheet{Stations: []daemon.SheetStation{}}
	a, err := store.Open(vfs.OS{}, folder)
	if err != nil {
		return sheet, err
	}
	stations, err := stationsOf(a, station)
	if err != nil {
		return sheet, err
	}
	sheet.Asked = len(stations)
	last := int64(-1)
	for _, s := range stations {
		until, err := lastMinute(a, s)
		if err != nil {
			return sheet, err
		}
		last = max(last, until)
		episodes, err := a.Faults(s)
		if err != nil {
			return sheet, err
		}
		checks, err := checksOf(a, s, until)
		if err != nil {
			return sheet, err
		}
		if part, ok := daemon.SheetStationOf(s, episodes, checks, until); ok {
			sheet.Stations = append(sheet.Stations, part)
		}
	}
	if last >= 0 {
		sheet.Until = minuteTime(last).Format(time.RFC3339)
	}
	return sheet, nil
}

// lastMinute is the last minute that the archive has of a station; -1 where it has none.
func lastMinute(a *store.Archive, station string) (int64, error) {
	days, err := a.RawDays(station)
	if err != nil || len(days) == 0 {
		return -1, err
	}
	last := int64(-1)
	day := days[len(days)-1]
	err = a.ReadMinutes(station, day*1440, (day+1)*1440, []string{"time"}, func(r *store.Rows) error {
		if n := len(r.Vectors[0].Times); n > 0 {
			last = max(last, r.Minute(n-1))
		}
		return nil
	})
	if last < 0 {
		last = day * 1440
	}
	return last, err
}

// checksOf gives the repairs that were looked at by the end of the last day that is summed up.
func checksOf(a *store.Archive, station string, until int64) ([]fault.Check, error) {
	list, err := a.Summaries(station, until/1440-2, until/1440)
	if err != nil || len(list) == 0 {
		return nil, err
	}
	s, err := engine.DecodeSummary(list[len(list)-1].JSON)
	return s.Carry.Kinds.Checks, err
}

const askSheetWait = 10 * time.Second

// askSheet asks a running daemon.
func askSheet(address, station string) (daemon.Sheet, error) {
	var sheet daemon.Sheet
	client := http.Client{Timeout: askSheetWait}
	answer, err := client.Get(strings.TrimSuffix(address, "/") + "/status.json")
	if err != nil {
		return sheet, err
	}
	defer answer.Body.Close()
	if answer.StatusCode != http.StatusOK {
		return sheet, fmt.Errorf("%s: it answered %s; is it the address of a daemon's pages?", address, answer.Status)
	}
	if err := json.NewDecoder(answer.Body).Decode(&sheet); err != nil {
		return sheet, fmt.Errorf("%s: its answer is no morning sheet: %w", address, err)
	}
	if station == "" {
		return sheet, nil
	}
	kept := sheet.Stations[:0]
	for _, s := range sheet.Stations {
		if s.Station == station {
			kept = append(kept, s)
		}
	}
	sheet.Stations, sheet.Asked = kept, 1
	return sheet, nil
}
