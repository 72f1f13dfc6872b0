package fault

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"testing"

	"fluxwarden/rules"
)

// A stream makes minutes of every sort from a few bytes: calm and wild values, gaps, marks, stamps that come twice, a sun that does as it likes.
type stream struct {
	text  []byte
	at    int
	state uint64
	held  [rules.QuantityCount]float64
	runs  [rules.QuantityCount]int
	mode  [rules.QuantityCount]byte
	left  int
	sun   byte
}

func (s *stream) next() byte {
	if len(s.text) == 0 {
		return 0
	}
	b := s.text[s.at%len(s.text)] ^ byte(s.at/len(s.text)*37)
	s.at++
	return b
}

// share is in 0..1.
func (s *stream) share() float64 {
	s.state = s.state*6364136223846793005 + 1442695040888963407
	return float64(s.state>>11) / (1 << 53)
}

// Ways in which a value can go.
var ways = []func(s *stream, sound, held float64) float64{
	func(s *stream, sound, _ float64) float64 { return sound },
	func(s *stream, sound, _ float64) float64 { return sound + 0.5*(s.share()-0.5) },
	func(s *stream, sound, _ float64) float64 { return sound * (0.97 + 0.06*s.share()) },
	func(s *stream, sound, _ float64) float64 { return 1.4 * sound },
	func(s *stream, sound, _ float64) float64 { return -sound },
	func(s *stream, sound, _ float64) float64 { return sound / 1000 },
	func(s *stream, sound, _ float64) float64 { return sound * 1000 },
	func(s *stream, sound, _ float64) float64 { return sound - 14 },
	func(s *stream, sound, _ float64) float64 { return math.Min(sound, 300) },
	func(s *stream, _, held float64) float64 { return held },
	func(s *stream, _, _ float64) float64 { return math.NaN() },
	func(s *stream, _, _ float64) float64 { return 0 },
	func(s *stream, _, _ float64) float64 { return 2000*s.share() - 500 },
	func(s *stream, _, _ float64) float64 { return 1e12 * (s.share() - 0.5) },
	func(s *stream, _, _ float64) float64 { return -1e-300 },
	func(s *stream, _, _ float64) float64 { return -7999 },
}

// minute fills in minute m.
func (s *stream) minute(m *Minute, at int64) {
	if s.left--; s.left < 0 {
		s.left = int(s.next())*int(1+s.next()/40) + 5
		s.sun = s.next()
		for q := range s.mode {
			s.mode[q] = 0
			if b := s.next(); b > 215 {
				s.mode[q] = b % byte(len(ways))
			}
		}
	}
	hour := 2 * math.Pi * float64(at%1440) / 1440
	mu := math.Max(0, 0.7*cosDeg(hour*180/math.Pi-180)-0.1)
	*m = Minute{Minute: at, ZenithDeg: 96 + 20*s.share(), AzimuthDeg: math.Mod(float64(at%1440)/4, 360), Records: 1, SaWm2: 1361}
	if mu > 0 {
		m.Mu, m.ZenithDeg = mu, math.Acos(mu)*180/math.Pi
	}
	m.Hidden = s.sun == 7
	cloud := 1.0
	if s.sun > 128 {
		cloud = s.share()
	}
	beam, diffuse := 900*mu*cloud, 80*math.Sqrt(mu)+100*mu*(1-cloud)
	sound := [rules.QuantityCount]float64{rules.Global: beam*mu + diffuse, rules.Direct: beam, rules.Diffuse: diffuse, rules.Reflected: 0.2 * (beam*mu + diffuse),
		rules.LWDown: 300 + s.share(), rules.LWUp: 380 + s.share(), rules.UV: 20 * mu, rules.PAR: 1500 * mu, rules.AirTemperature: 10, rules.Humidity: 60, rules.Pressure: 980, rules.WindSpeed: 3}
	m.BodyC, m.NetWm2 = 10.4+0.1*s.share(), -60+s.share()
	switch s.sun % 11 {
	case 3:
		m.Records = int(s.sun) & 1
	case 4:
		m.BodyC, m.NetWm2 = -40+200*s.share(), 1e6*(s.share()-0.5)
	case 5:
		m.BodyC, m.NetWm2 = math.NaN(), math.NaN()
	case 6:
		m.AnyConflict = s.share() < 0.5
	case 8:
		m.SaWm2, m.Mu = 1361*s.share(), s.share() // a sun that leaps about
		m.ZenithDeg = math.Acos(m.Mu) * 180 / math.Pi
	}
	for q := range m.Value {
		v := ways[s.mode[q]](s, sound[q], s.held[q])
		if m.Records == 0 {
			v = math.NaN()
		}
		if v == s.held[q] {
			s.runs[q]++
		} else {
			s.held[q], s.runs[q] = v, 1
		}
		m.Value[q], m.Run[q], m.Marked[q] = v, s.runs[q], v == -7999
	}
}

// held holds, minute by minute, what must hold of episodes whatever comes in.
func held(before, now []Episode, minute int64) error {
	for i := range now {
		e := &now[i]
		switch {
		case e.From > e.Raised, e.To <= e.From, !(e.Confidence >= 0 && e.Confidence <= 1), e.Rev < 1, len(e.Also) > 1, slices.Contains(e.Also, e.Kind):
			return fmt.Errorf("ill formed: %+v", *e)
		case e.Advice != e.Kind.Entry().Advice:
			return fmt.Errorf("the advice is another kind's: %+v", *e)
		case e.Raised > minute:
			return fmt.Errorf("raised at %d, told at %d: %+v", e.Raised, minute, *e)
		case e.Raised-e.From > hindsightMinutes:
			return fmt.Errorf("it reaches back too far: %+v", *e)
		}
		for _, x := range e.Evidence {
			if math.IsNaN(x.Value) || math.IsInf(x.Value, 0) {
				return fmt.Errorf("evidence %+v: %+v", x, *e)
			}
		}
		for k := range i {
			o := &now[k]
			if o.ID == e.ID {
				return fmt.Errorf("two of one id: %+v and %+v", *o, *e)
			}
			if o.To == Open && e.To == Open && o.Instrument == e.Instrument && o.Kind == e.Kind {
				return fmt.Errorf("two open of one kind: %+v and %+v", *o, *e)
			}
		}
		k := slices.IndexFunc(before, func(o Episode) bool { return o.ID == e.ID })
		if k < 0 {
			if e.Kind != rules.DataGap && e.Raised != minute {
				return fmt.Errorf("new at %d, raised at %d: %+v", minute, e.Raised, *e)
			}
			continue
		}
		if o := &before[k]; o.To != Open && e.To == Open && reopened(o, e, minute) {
			continue
		}
		if o := &before[k]; e.Rev < o.Rev || o.To != Open && (e.To != o.To || e.Rev != o.Rev && !toldHowItEnded(o, e)) {
			return fmt.Errorf("%+v became %+v", *o, *e)
		}
	}
	for i := range before {
		if !slices.ContainsFunc(now, func(e Episode) bool { return e.ID == before[i].ID }) {
			return fmt.Errorf("forgotten: %+v", before[i])
		}
	}
	return nil
}

// reopened says whether an end was taken back as it may be: soon after, of a kind that can seem to be over, and said by a new revision.
func reopened(was, is *Episode, minute int64) bool {
	return restsOnClosing.Has(is.Kind) && is.Kind != rules.SignalLost && is.Rev > was.Rev && is.From <= was.From && minute-was.To < reopenMinutes
}

// toldHowItEnded says whether all that is new of an episode that is over is what became of its end, which is told once.
func toldHowItEnded(before, now *Episode) bool {
	n := len(before.Evidence)
	return now.Rev == before.Rev+1 && before.Check() == nil && now.Check() != nil && len(now.Evidence) == n+2 && slices.Equal(before.Evidence, now.Evidence[:n])
}

// setupOf leaves out some of a station's instruments.
func setupOf(lacking byte) *Setup {
	s := whole()
	for q := range s.Instruments {
		if lacking>>q&1 == 1 {
			s.Instruments[q] = Instrument{SensitivityUVPerW: 1}
		}
	}
	return s
}

// watch runs the days of a stream. Each midnight what is carried is written and read back, and a watcher that goes on from the copy must go on as
// the one that goes on from the original.
func watch(text []byte, days int64, lacking byte) error {
	s := &stream{text: text, state: uint64(len(text))}
	setup := setupOf(lacking)
	var facts, factsBack []DayFacts
	var carry, carryBack *Carry
	for day := int64(20000); day < 20000+days; day++ {
		w, back := NewWatcher(setup, day, facts, carry), NewWatcher(setup, day, factsBack, carryBack)
		before := w.Episodes()
		for at := 1440 * day; at < 1440*(day+1); at++ {
			var m Minute
			s.minute(&m, at)
			copied := m
			w.Minute(&m)
			back.Minute(&copied)
			now := w.Episodes()
			if err := held(before, now, at); err != nil {
				return err
			}
			before = now
		}
		f, c := w.EndDay()
		fBack, cBack := back.EndDay()
		one, err := json.Marshal([]any{f, c, w.Episodes()})
		if err != nil {
			return err
		}
		if two, err := json.Marshal([]any{fBack, cBack, back.Episodes()}); err != nil || !bytes.Equal(one, two) {
			return fmt.Errorf("day %d from the copy: %v\n%s\nwant\n%s", day-20000, err, two, one)
		}
		facts, carry = append(facts, f), &c
		var readFacts DayFacts
		readCarry := new(Carry)
		if err := readBack(f, &readFacts); err != nil {
			return err
		}
		if err := readBack(c, readCarry); err != nil {
			return err
		}
		factsBack, carryBack = append(factsBack, readFacts), readCarry
	}
	return nil
}

func readBack(from, to any) error {
	text, err := json.Marshal(from)
	if err == nil {
		err = json.Unmarshal(text, to)
	}
	if err != nil {
		return err
	}
	if again, err := json.Marshal(to); err != nil || !bytes.Equal(again, text) {
		return fmt.Errorf("%v: written again it is\n%s\nwas\n%s", err, again, text)
	}
	return nil
}

// FuzzWatcher: whatever comes in, nothing panics, episodes stay well formed, and a restart at midnight changes nothing.
func FuzzWatcher(f *testing.F) {
	for k := range byte(24) {
		text := make([]byte, 97)
		for i := range text {
			text[i] = byte(i*i*7+i*int(k)*13) ^ k*11
		}
		f.Add(text, byte(3), []byte{0, 0, 0, 1, 2, 4, 6, 3, 5, 7, 0x10, 0xf7}[k%12])
	}
	f.Add([]byte{}, byte(2), byte(0))
	f.Add([]byte{}, byte(2), byte(0xff))
	f.Fuzz(func(t *testing.T, text []byte, days, lacking byte) {
		if len(text) > 4096 {
			t.Skip("long enough")
		}
		if err := watch(text, int64(days%5)+1, lacking); err != nil {
			t.Fatal(err)
		}
	})
}
