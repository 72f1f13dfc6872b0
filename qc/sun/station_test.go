package sun

import (
	"bufio"
	"compress/gzip"
	"math"
	"os"
	"strconv"
	"strings"
	"testing"
	"time"
)

// The daily files of a US radiation network print the zenith angle of each minute's middle to 0.01 degrees; their
// label is the end of the minute. Seen in the numbers: while the sun is up the angle is refracted, as at sea level. One file
// prints its west longitude as positive. The network's own algorithm is the approximate one of
// the Astronomical Almanac (0.01 degrees); near the horizon refraction formulae part.
func TestStationFilesZenith(t *testing.T) {
	for _, c := range []struct {
		file string
		site Site
	}{
		{"tbl17005.dat.gz", Site{40.125, -105.237, 1689}},
		{"dra24048.dat.gz", Site{36.62, -116.02, 1007}},
		{"slv16001.dat.gz", Site{37.70, -105.92, 2317}},
	} {
		t.Run(c.file, func(t *testing.T) {
			f, err := os.Open("../../../shared/data/us_network/" + c.file)
			if err != nil {
				t.Skip("the station-day is not on this machine: ", err)
			}
			defer func() { _ = f.Close() }()
			z, err := gzip.NewReader(f)
			if err != nil {
				t.Fatal(err)
			}
			worstUp, worstDown, rows := 0.0, 0.0, 0
			var day Day
			for s := bufio.NewScanner(z); s.Scan(); {
				v := strings.Fields(s.Text())
				if len(v) < 20 {
					continue
				}
				var n [6]int
				for i := range n {
					if n[i], err = strconv.Atoi(v[i]); err != nil {
						t.Fatal(err)
					}
				}
				printed, err := strconv.ParseFloat(v[7], 64)
				if err != nil {
					t.Fatal(err)
				}
				if rows == 0 {
					day = NewDay(unixDay(n[0], time.Month(n[2]), n[3]), c.site)
				}
				got := day.AtMinute(float64(60*(60*n[4]+n[5]) - 30)).ZenithDeg
				switch {
				case got > 93:
					worstDown = math.Max(worstDown, math.Abs(got-printed))
				case got < 85:
					const standardTemperatureC = 15
					worstUp = math.Max(worstUp, math.Abs(ApparentZenith(got, 1013.25, standardTemperatureC)-printed))
				}
				rows++
			}
			t.Logf("%d minutes, largest difference %.4f degrees by day, %.4f by night", rows, worstUp, worstDown)
			if rows < 1400 || worstUp > 0.02 || worstDown > 0.02 {
				t.Errorf("%d minutes, largest difference %.4f degrees by day, %.4f by night, allowed 0.02", rows, worstUp, worstDown)
			}
		})
	}
}
