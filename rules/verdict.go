package rules

// A Verdict is what the tests and the open faults add up to for one quantity in one minute. The list is closed.
type Verdict uint8

const (
	Absent Verdict = iota // nothing usable was sent
	Accepted
	Questioned
	Rejected
	VerdictCount = iota
)

var verdictNames = [VerdictCount]string{"absent", "accepted", "questioned", "rejected"}

func (v Verdict) String() string { return verdictNames[v] }

// ParseVerdict gives the verdict of a name.
func ParseVerdict(name string) (Verdict, bool) {
	for i, n := range verdictNames {
		if n == name {
			return Verdict(i), true
		}
	}
	return 0, false
}
