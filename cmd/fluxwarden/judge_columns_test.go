package main

import (
	"bytes"
	"strings"
	"testing"

	"fluxwarden/ingest/wire"
	"fluxwarden/rules"
)

func TestWarnOfColumns(t *testing.T) {
	site, err := rules.Load("../../testdata/readme/site.yaml")
	if err != nil {
		t.Fatal(err)
	}
	const whole = "time,g1_mv,p1_mv,d1_mv,l1_mv,l1_case_c,ta_c,rh_pct,p_hpa"
	for _, c := range []struct{ name, header, want string }{
		{"whole", whole, ""},
		{"in another order", "p_hpa,time,rh_pct,ta_c,l1_case_c,l1_mv,d1_mv,p1_mv,g1_mv", ""},
		{"one missing", strings.Replace(whole, ",d1_mv", "", 1), "f.csv:1: no column for d1_mv"},
		{"one misspelt", strings.Replace(whole, "d1_mv", "d1mv", 1), "reads d1mv"},
	} {
		t.Run(c.name, func(t *testing.T) {
			csv, err := wire.NewCSV(strings.NewReader(c.header+"\n"), wire.CSVOptions{Name: "f.csv"})
			if err != nil {
				t.Fatal(err)
			}
			var out bytes.Buffer
			if err := warnOfColumns(&out, "f.csv", csv, &site.Stations[0]); err != nil {
				t.Fatal(err)
			}
			if (c.want == "") != (out.Len() == 0) || !strings.Contains(out.String(), c.want) {
				t.Errorf("got %q, want %q in it", &out, c.want)
			}
		})
	}
}
