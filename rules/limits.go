package rules

// A SunLimit is a limit that follows the sun: Factor * Sa * mu0^Power + Offset above, Low below; W/m2. Sa is the
// solar constant over the squared distance, mu0 the cosine of the zenith angle, nothing once the sun is down.
type SunLimit struct{ Low, Factor, Power, Offset float64 }

// A Band is a constant lower and upper bound.
type Band struct{ Low, High float64 }

// Limits are the constants of the tests as they hold for one station: the published values of the table limitTable with the
// network's and the station's overrides applied.
type Limits struct {
	SolarConstantWm2 float64

	Possible, Rare [4]SunLimit // indexed by Global, Direct, Diffuse, Reflected
	PossibleLW     [2]Band     // indexed by LWDown-LWDown, LWUp-LWDown
	RareLW         [2]Band
	PossibleUV     SunLimit
	PossiblePAR    SunLimit

	SamplingShare float64 // least share of the samples that the logger's interval promises

	ClosureHigh, ClosureLow, ClosureMinWm2, ClosureFloorWm2 float64 // relative tolerance for a high and a low sun
	DiffuseRatioHigh, DiffuseRatioLow, DiffuseRatioMinWm2   float64
	AlbedoMinWm2, AlbedoOffsetWm2                           float64
	LWAirDownFactor, LWAirDownAboveWm2                      float64
	LWAirUpBelowK, LWAirUpAboveK                            float64
	LWPairBelowWm2, LWPairAboveWm2                          float64
	RayleighBelowWm2                                        float64
	ClearDirectFactor, ClearGlobalFactor, ClearAboveWm2     float64
	ClearLWBelowFactor, ClearLWAboveWm2, ClearGlobalMinutes float64
	NightZenithDeg, NightZeroExtraWm2                       float64
	StuckMinutes, StuckNightMinutes                         float64
	SpikeWm2, SpikeLWWm2                                    float64
	AirTemperatureMinC, AirTemperatureMaxC                  float64
	BodyMinC, BodyMaxC, BodyFromAirK                        float64
	GapMinutes                                              float64
	FanLowRPM, FanHighRPM, TrackerLow                       float64
	SupplyLowV, SupplyHighV, PrecipitationHighMM            float64
	PartnerFactor, PartnerFloorWm2, PartnerMoved            float64
}

// A Limit is one row of the table: its key in a site file, the published value, its unit, the range that an override
// may take, and where the value comes from.
type Limit struct {
	Key       string
	Value     float64
	Unit      string
	Low, High float64
	Source    string
	field     func(*Limits) *float64
}

// Field is where the row stands in a set of limits.
func (l *Limit) Field(in *Limits) *float64 { return l.field(in) }

const (
	srcNetwork  = "Long & Dutton 2002, recommended tests V2.0 (from memory)"
	srcManual   = "WMO/TD-No. 1274 (2005)"
	srcPractice = "common practice"
	srcOwn      = "own choice"
)

// LimitTable lists every limit in the order that documents print it.
func LimitTable() []Limit { return limitTable }

var limitTable = buildLimitTable()

func buildLimitTable() []Limit {
	t := []Limit{
		{"solar_constant", 1360.8, "W/m2", 1300, 1400, "Kopp & Lean 2011, Geophys. Res. Lett. 38, L01706", func(l *Limits) *float64 { return &l.SolarConstantWm2 }},
	}
	sun := func(group string, q Quantity, low, factor, power, offset float64, source string, at func(*Limits) *SunLimit) {
		key := group + "." + q.String()
		t = append(t,
			Limit{key + ".low", low, q.Unit(), -200, 100, source, func(l *Limits) *float64 { return &at(l).Low }},
			Limit{key + ".factor", factor, "1", 0, 10, source, func(l *Limits) *float64 { return &at(l).Factor }},
			Limit{key + ".power", power, "1", 0, 3, source, func(l *Limits) *float64 { return &at(l).Power }},
			Limit{key + ".offset", offset, q.Unit(), 0, 500, source, func(l *Limits) *float64 { return &at(l).Offset }})
	}
	band := func(group string, q Quantity, low, high float64, at func(*Limits) *Band) {
		key := group + "." + q.String()
		t = append(t,
			Limit{key + ".low", low, q.Unit(), 0, 1000, srcNetwork, func(l *Limits) *float64 { return &at(l).Low }},
			Limit{key + ".high", high, q.Unit(), 0, 1500, srcNetwork, func(l *Limits) *float64 { return &at(l).High }})
	}
	sun("possible", Global, -4, 1.5, 1.2, 100, srcNetwork, func(l *Limits) *SunLimit { return &l.Possible[Global] })
	sun("possible", Direct, -4, 1, 0, 0, srcNetwork, func(l *Limits) *SunLimit { return &l.Possible[Direct] })
	sun("possible", Diffuse, -4, 0.95, 1.2, 50, srcNetwork, func(l *Limits) *SunLimit { return &l.Possible[Diffuse] })
	sun("possible", Reflected, -4, 1.2, 1.2, 50, srcNetwork, func(l *Limits) *SunLimit { return &l.Possible[Reflected] })
	sun("rare", Global, -2, 1.2, 1.2, 50, srcNetwork, func(l *Limits) *SunLimit { return &l.Rare[Global] })
	sun("rare", Direct, -2, 0.95, 0.2, 10, srcNetwork, func(l *Limits) *SunLimit { return &l.Rare[Direct] })
	sun("rare", Diffuse, -2, 0.75, 1.2, 30, srcNetwork, func(l *Limits) *SunLimit { return &l.Rare[Diffuse] })
	sun("rare", Reflected, -2, 1, 1.2, 50, srcNetwork, func(l *Limits) *SunLimit { return &l.Rare[Reflected] })
	band("possible", LWDown, 40, 700, func(l *Limits) *Band { return &l.PossibleLW[0] })
	band("possible", LWUp, 40, 900, func(l *Limits) *Band { return &l.PossibleLW[1] })
	band("rare", LWDown, 60, 500, func(l *Limits) *Band { return &l.RareLW[0] })
	band("rare", LWUp, 60, 700, func(l *Limits) *Band { return &l.RareLW[1] })
	// Below 0.4 um stand 12.2 % of a 5778 K black body's output; 47 % of the extraterrestrial sunlight's energy is between 0.4 and
	// 0.7 um, at about 4.57 umol/J. The bounds are those of the global scaled so.
	sun("possible", UV, -1, 0.15, 1.2, 5, "own choice, from the Planck share below 0.4 um", func(l *Limits) *SunLimit { return &l.PossibleUV })
	sun("possible", PAR, -20, 3.3, 1.2, 200, "own choice, from the share of 0.4 to 0.7 um at 4.57 umol/J", func(l *Limits) *SunLimit { return &l.PossiblePAR })
	one := func(key string, value float64, unit string, low, high float64, source string, at func(*Limits) *float64) {
		t = append(t, Limit{key, value, unit, low, high, source, at})
	}
	one("sampling.share", 0.75, "1", 0, 1, srcOwn, func(l *Limits) *float64 { return &l.SamplingShare })
	one("closure.high_sun", 0.08, "1", 0.005, 1, srcNetwork, func(l *Limits) *float64 { return &l.ClosureHigh })
	one("closure.low_sun", 0.15, "1", 0.005, 1, srcNetwork, func(l *Limits) *float64 { return &l.ClosureLow })
	one("closure.min", 50, "W/m2", 0, 500, srcNetwork, func(l *Limits) *float64 { return &l.ClosureMinWm2 })
	one("closure.floor", 20, "W/m2", 0, 200, "own choice: offset and directional limits of class A (ISO 9060:2018, from memory) for three instruments together", func(l *Limits) *float64 { return &l.ClosureFloorWm2 })
	one("diffuse_ratio.high_sun", 1.05, "1", 1, 2, srcNetwork, func(l *Limits) *float64 { return &l.DiffuseRatioHigh })
	one("diffuse_ratio.low_sun", 1.10, "1", 1, 2, srcNetwork, func(l *Limits) *float64 { return &l.DiffuseRatioLow })
	one("diffuse_ratio.min", 50, "W/m2", 0, 500, srcNetwork, func(l *Limits) *float64 { return &l.DiffuseRatioMinWm2 })
	one("albedo.min", 50, "W/m2", 0, 500, srcNetwork, func(l *Limits) *float64 { return &l.AlbedoMinWm2 })
	one("albedo.offset", 0, "W/m2", 0, 100, srcNetwork, func(l *Limits) *float64 { return &l.AlbedoOffsetWm2 })
	one("lw_air.down_factor", 0.4, "1", 0, 1, srcNetwork+"; "+srcManual+" 9.3.2.2 has 0.75, to alert only", func(l *Limits) *float64 { return &l.LWAirDownFactor })
	one("lw_air.down_above", 25, "W/m2", 0, 200, srcNetwork, func(l *Limits) *float64 { return &l.LWAirDownAboveWm2 })
	one("lw_air.up_below", 15, "K", 0, 100, srcNetwork, func(l *Limits) *float64 { return &l.LWAirUpBelowK })
	one("lw_air.up_above", 25, "K", 0, 100, srcNetwork, func(l *Limits) *float64 { return &l.LWAirUpAboveK })
	one("lw_pair.below", 300, "W/m2", 0, 600, srcNetwork, func(l *Limits) *float64 { return &l.LWPairBelowWm2 })
	one("lw_pair.above", 25, "W/m2", 0, 200, srcNetwork, func(l *Limits) *float64 { return &l.LWPairAboveWm2 })
	one("rayleigh.below", 1, "W/m2", 0, 50, "Long & Shi 2008 (from memory); the class's zero offset is allowed beside it", func(l *Limits) *float64 { return &l.RayleighBelowWm2 })
	one("clear_sky.direct", 1.05, "1", 1, 2, srcOwn+": of the beam at the least load that the learnt sky's band holds", func(l *Limits) *float64 { return &l.ClearDirectFactor })
	one("clear_sky.global", 1.3, "1", 1, 3, srcOwn+": cloud edges lift global to 1.2 times and more, but not for long", func(l *Limits) *float64 { return &l.ClearGlobalFactor })
	one("clear_sky.global_minutes", 20, "min", 1, 240, srcOwn+": for so long on end", func(l *Limits) *float64 { return &l.ClearGlobalMinutes })
	one("clear_sky.above", 30, "W/m2", 0, 500, srcOwn, func(l *Limits) *float64 { return &l.ClearAboveWm2 })
	one("clear_sky.lw_below", 0.75, "1", 0, 1, srcOwn+": of the learnt cloudless lw_down; formulas part by 15 % in cold dry air", func(l *Limits) *float64 { return &l.ClearLWBelowFactor })
	one("clear_sky.lw_above", 30, "W/m2", 0, 200, srcOwn+": above a black body at air temperature, which a low overcast is; inversions lift it", func(l *Limits) *float64 { return &l.ClearLWAboveWm2 })
	one("night.zenith", 96, "degrees", 91, 120, "own choice: past civil twilight, diffuse is nothing there", func(l *Limits) *float64 { return &l.NightZenithDeg })
	one("night.extra", 5, "W/m2", 0, 100, srcOwn+": allowed beside the class's zero offset", func(l *Limits) *float64 { return &l.NightZeroExtraWm2 })
	one("stuck.day", 30, "min", 2, 1440, srcOwn, func(l *Limits) *float64 { return &l.StuckMinutes })
	one("stuck.night", 720, "min", 2, 10080, srcOwn+": at night a coarse logger may stand still for hours", func(l *Limits) *float64 { return &l.StuckNightMinutes })
	one("spike.shortwave", 400, "W/m2", 1, 2000, srcOwn, func(l *Limits) *float64 { return &l.SpikeWm2 })
	one("spike.longwave", 40, "W/m2", 1, 500, srcOwn, func(l *Limits) *float64 { return &l.SpikeLWWm2 })
	one("air_temperature.low", -95, "degC", -150, 60, "lowest air temperature measured is about -89 degrees C (from memory)", func(l *Limits) *float64 { return &l.AirTemperatureMinC })
	one("air_temperature.high", 60, "degC", -50, 100, "highest air temperature measured is about 57 degrees C (from memory)", func(l *Limits) *float64 { return &l.AirTemperatureMaxC })
	one("body.low", -95, "degC", -150, 100, srcOwn, func(l *Limits) *float64 { return &l.BodyMinC })
	one("body.high", 80, "degC", 0, 150, srcOwn, func(l *Limits) *float64 { return &l.BodyMaxC })
	one("body.from_air", 20, "K", 1, 100, "Long & Shi 2008 (from memory): 10 to 20 K", func(l *Limits) *float64 { return &l.BodyFromAirK })
	one("gap", 30, "min", 2, 1440, srcOwn, func(l *Limits) *float64 { return &l.GapMinutes })
	one("partner.factor", 1, "1", 0, 10, srcOwn+": times the two instruments' own expanded uncertainty together", func(l *Limits) *float64 { return &l.PartnerFactor })
	one("partner.floor", 5, "W/m2", 0, 200, srcOwn, func(l *Limits) *float64 { return &l.PartnerFloorWm2 })
	one("partner.moved", 0.25, "1", 0, 2, srcOwn+": share of the change since the minute before that two instruments may differ by on the edge of a cloud", func(l *Limits) *float64 { return &l.PartnerMoved })
	one("fan.low", 500, "rpm", 0, 1e6, srcPractice+": the fans of domes turn at 1000 to 8000 rpm; half of the least", func(l *Limits) *float64 { return &l.FanLowRPM })
	one("fan.high", 10000, "rpm", 0, 1e6, srcPractice+": above any of them", func(l *Limits) *float64 { return &l.FanHighRPM })
	one("tracker.low", 1, "1", -1e6, 1e6, srcPractice+": a mode of nothing is a tracker that stands; give the entry its sound values where that differs", func(l *Limits) *float64 { return &l.TrackerLow })
	one("supply.low", 10.8, "V", 0, 1000, srcPractice+": a lead battery of 12 V is empty", func(l *Limits) *float64 { return &l.SupplyLowV })
	one("supply.high", 16, "V", 0, 1000, srcPractice+": charging a lead battery of 12 V ends below", func(l *Limits) *float64 { return &l.SupplyHighV })
	one("precipitation.high", 32, "mm", 0, 1000, "the most measured in a minute is about 31 mm (from memory)", func(l *Limits) *float64 { return &l.PrecipitationHighMM })
	return t
}

// DefaultLimits is the table's published values, not overridden.
func DefaultLimits() Limits {
	var l Limits
	for i := range limitTable {
		*limitTable[i].field(&l) = limitTable[i].Value
	}
	return l
}

// FindLimit gives the row of a key.
func FindLimit(key string) (*Limit, bool) {
	for i := range limitTable {
		if limitTable[i].Key == key {
			return &limitTable[i], true
		}
	}
	return nil, false
}

// ClassZeroWm2 is the most that the total zero offset of an instrument of an ISO 9060:2018 class may be (Table 1, row c, from
// memory: 10, 21 and 41 W/m2 for A, B and C); an unclassified one is held to class C. A pyrheliometer has no net longwave to lose
// to a cold sky and is held to a class A bound.
func ClassZeroWm2(class string, q Quantity) float64 {
	if q == Direct {
		return 10
	}
	switch class {
	case "A":
		return 10
	case "B":
		return 21
	default:
		return 41
	}
}
