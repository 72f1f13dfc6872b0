package engine

import (
	"math"
	"slices"
	"strings"
	"testing"
	"time"

	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// TestU95CoversClosure holds the stated uncertainties against something that they were not made from: on the clear days of the radiation
// station of the Technical University of Denmark, global less direct on the horizontal less diffuse is an error of the three together. Twice
// a standard uncertainty should cover it in 95 minutes of 100; the bounds are of no use if they are ten times what is seen.
func TestU95CoversClosure(t *testing.T) {
	p := planOf(t, lyngbyText)
	var ratios, shares []float64
	for _, file := range []struct{ month, days string }{{"2016_05", "05 06 08 09 12"}, {"2024_10", "03 04"}, {"2025_02", "14 16 18 19"}} {
		at, columns := readTable(t, "lyngby/"+file.month+".csv.gz", time.DateTime)
		b := batchOf(at, columns)
		for _, d := range strings.Fields(file.days) {
			date := strings.Replace(file.month, "_", "-", 1) + "-" + d
			day := dayOf(t, date)
			j := p.NewJudged(day)
			p.Prepare(j, blockOf(p, b, day), 0, minute.PerDay)
			own, part := closureRatios(j)
			ratios, shares = append(ratios, own...), append(shares, part...)
			t.Logf("%s: %4d minutes, residual over U95: median %.2f, 95th percentile %.2f", date, len(own), medianOf(own), percentileOf(own, 95))
		}
	}
	covered := 0
	for _, r := range ratios {
		if r <= 1 {
			covered++
		}
	}
	percent := 100 * float64(covered) / float64(len(ratios))
	t.Logf("%d minutes: %.1f %% within U95, median residual %.2f of it; U95 of global is %.1f %% in the median", len(ratios), percent, medianOf(ratios), 100*medianOf(shares))
	if len(ratios) < 3000 || percent < 95 || medianOf(ratios) < 0.1 {
		t.Errorf("%d minutes, %.1f %% within U95, median residual %.2f of it; want 3000, 95 %% and 0.1", len(ratios), percent, medianOf(ratios))
	}
}

// closureRatios gives, for every minute with the sun above 10 degrees, the residual of closure over its U95, and U95 of global over global.
func closureRatios(j *Judged) (ratios, shares []float64) {
	g, b, d := j.Primary(rules.Global), j.Primary(rules.Direct), j.Primary(rules.Diffuse)
	for r := range minute.PerDay {
		mu := j.CosZenith[r]
		if residual := math.Abs(g.Measured[r] - b.Measured[r]*mu - d.Measured[r]); j.ApparentZenithDeg[r] < 80 && residual == residual {
			ratios = append(ratios, residual/math.Sqrt(g.U95[r]*g.U95[r]+b.U95[r]*mu*b.U95[r]*mu+d.U95[r]*d.U95[r]))
			shares = append(shares, g.U95[r]/g.Measured[r])
		}
	}
	return ratios, shares
}

func percentileOf(x []float64, percent int) float64 {
	sorted := slices.Sorted(slices.Values(x))
	return sorted[(len(sorted)-1)*percent/100]
}
