package sun

import (
	"crypto/sha256"
	"encoding/binary"
	"encoding/hex"
	"math"
	"testing"
	"time"
)

// The bits of three days at four sites. They enter row digests: a change here, on any CPU or by any edit, is
// a raise of judge_version.
func TestGoldenDigest(t *testing.T) {
	const want = "56d383a8b3cd6693fac4d47f97aec49d00c815d6c33b4b524b2352343a64e39a"
	h := sha256.New()
	put := func(v ...float64) {
		for _, x := range v {
			var b [8]byte
			binary.LittleEndian.PutUint64(b[:], math.Float64bits(x))
			h.Write(b[:])
		}
	}
	for _, day := range []int64{unixDay(1988, time.February, 29), unixDay(2015, time.March, 20), unixDay(2026, time.June, 21)} {
		for _, site := range []Site{{57.121, -3.642, 640}, {-75.1, 123.3, 3233}, {90, 0, 0}, {0, 179.99, 10}} {
			d := NewDay(day, site)
			e := NewEclipse(&d, site)
			for m := range 1440 {
				s := float64(60*m + 30)
				p := d.AtMinute(s)
				put(p.CosZenith, p.ZenithDeg, p.AzimuthDeg, p.DistanceAU, p.HourAngleDeg, d.EquationOfTimeMin(s), e.ObscuredFraction(s))
				put(ApparentZenith(p.ZenithDeg, 1010, 10), IncidenceCos(p.ZenithDeg, p.AzimuthDeg, 30, 170))
			}
			r := RiseSet(day, site, d.deltaTSeconds)
			put(r.TransitSeconds)
		}
	}
	if got := hex.EncodeToString(h.Sum(nil)); got != want {
		t.Errorf("digest %s, golden %s", got, want)
	}
}
