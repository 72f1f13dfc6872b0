package rules

import (
	"fmt"
	"math"
	"strings"

	"cel.dev/cel-go/cel"
	"cel.dev/cel-go/common/cost"
	"cel.dev/cel-go/common/types"
	"cel.dev/cel-go/ext"
)

// A LocalTest is a test of the site's own: an expression in CEL over the minute's named values that is true where the test misses.
type LocalTest struct {
	Name string
	Of   []Quantity // whose primary instruments it is held against
	Miss string     // the expression, as written
	Line int

	Check LocalCheck // compiled; never nil in a site that was parsed
}

// A LocalCheck is an expression ready to be asked. It may be shared and asked at the same time.
type LocalCheck interface {
	// Outcome asks it of a minute: values are in the order of Station.LocalNames, NaN where there is none. An expression that needs a value
	// that is not there does not apply.
	Outcome(values []float64) Outcome
}

// Bounds of local tests: so many a station, so long, and so many steps of evaluation, a step being about one operation.
const (
	LocalTestsMax  = 16
	localBytesMax  = 1000
	localCostMax   = 1000
	localCostAsked = 10 * localCostMax // when it runs: the estimate made when it is loaded is an upper bound, so this is never met
)

// Places of the named values that every station has.
const (
	LocalZenith           = iota // apparent zenith angle of the sun, degrees
	LocalAzimuth                 // from north, clockwise, degrees
	LocalCosZenith               // cosine of the apparent zenith angle, nothing below the horizon
	LocalExtraterrestrial        // normal to the beam, W/m2
	LocalClearGlobal             // what a cloudless sky would give, W/m2
	LocalClearDirect
	LocalClearDiffuse
	LocalClearLWDown
	LocalDayOfYear   // 1 to 366, UTC
	LocalMinuteOfDay // 0 to 1439, UTC
	LocalQuantities  // from here four values a quantity: mean, sd, min, max of the primary as measured, in the quantity's unit
	LocalWidth       = 4
	LocalHouse       = LocalQuantities + LocalWidth*QuantityCount // from here the means of the housekeeping channels, in Station.Housekeeping's order
)

var localNames = func() []string {
	names := []string{"zenith", "azimuth", "cos_zenith", "extraterrestrial", "clear_global", "clear_direct", "clear_diffuse", "clear_lw_down",
		"day_of_year", "minute_of_day"}
	for _, q := range quantityNames {
		names = append(names, q, q+"_sd", q+"_min", q+"_max")
	}
	return names
}()

// LocalNames lists the values that a local test of the station may name.
func (st *Station) LocalNames() []string {
	names := localNames[:len(localNames):len(localNames)]
	for i := range st.Housekeeping {
		names = append(names, "house_"+st.Housekeeping[i].Name)
	}
	return names
}

// A localCompiler turns expressions into checks. Stations that name their values alike share what is compiled.
type localCompiler struct {
	envs   map[string]*localEnv
	checks map[[2]string]*celCheck
}

type localEnv struct {
	key   string
	env   *cel.Env
	place map[string]int
}

// envOf gives the compiler's surroundings for a list of names.
func (c *localCompiler) envOf(names []string) (*localEnv, error) {
	key := strings.Join(names[len(localNames):], " ")
	if e := c.envs[key]; e != nil {
		return e, nil
	}
	options := []cel.EnvOption{ext.Math(), cel.CrossTypeNumericComparisons(true)}
	place := make(map[string]int, len(names))
	for i, name := range names {
		place[name] = i
		options = append(options, cel.Variable(name, cel.DoubleType))
	}
	env, err := cel.NewEnv(options...)
	if err != nil {
		return nil, fmt.Errorf("local test: %w", err)
	}
	if c.envs == nil {
		c.envs, c.checks = map[string]*localEnv{}, map[[2]string]*celCheck{}
	}
	e := &localEnv{key, env, place}
	c.envs[key] = e
	return e, nil
}

// A localTrouble is what is wrong with an expression: where in it, from 1, and how to mend it.
type localTrouble struct {
	line, column int
	what, mend   string
}

// compile turns an expression into a check.
func (c *localCompiler) compile(names []string, text string) (LocalCheck, *localTrouble) {
	e, err := c.envOf(names)
	if err != nil {
		return nil, &localTrouble{1, 1, err.Error(), "report it"}
	}
	if done := c.checks[[2]string{e.key, text}]; done != nil {
		return done, nil
	}
	ast, issues := e.env.Compile(text)
	if issues != nil && issues.Err() != nil {
		first := issues.Errors()[0]
		what, _, _ := strings.Cut(first.Message, " (did you mean") // the mend says it
		return nil, &localTrouble{first.Location.Line(), first.Location.Column() + 1, what, localMend(what, names)}
	}
	if ast.OutputType() != cel.BoolType {
		return nil, &localTrouble{1, 1, "the expression gives " + ast.OutputType().String() + ", not true or false", "compare it with something, as in global > 20.0"}
	}
	cost, err := e.env.EstimateCost(ast, noSizes{})
	if err != nil || cost.Max > localCostMax {
		return nil, &localTrouble{1, 1, fmt.Sprintf("the expression may take %d steps, %d are allowed", cost.Max, localCostMax), "make it simpler, or two tests of it"}
	}
	program, err := e.env.Program(ast, cel.CostLimit(localCostAsked), cel.EvalOptions(cel.OptOptimize))
	if err != nil {
		return nil, &localTrouble{1, 1, err.Error(), "write it in another way"}
	}
	check := &celCheck{program: program, place: e.place}
	for _, r := range ast.NativeRep().ReferenceMap() {
		if i, ok := e.place[r.Name]; ok {
			check.needs = appendOnce(check.needs, i)
		}
	}
	c.checks[[2]string{e.key, text}] = check
	return check, nil
}

// localMend says how to mend what the compiler found.
func localMend(message string, names []string) string {
	if _, rest, ok := strings.Cut(message, "undeclared reference to '"); ok {
		word, _, _ := strings.Cut(rest, "'")
		if near, ok := nearest(word, names); ok {
			return "did you mean " + near + "?"
		}
		return "use quantities such as global and direct_sd, zenith, azimuth, clear_global, day_of_year, or house_ and the name of a housekeeping channel"
	}
	if strings.Contains(message, "found no matching overload") {
		return "write numbers as 2.0, not 2"
	}
	return "write it in CEL, as in wind_speed > 25.0 && direct > 50.0"
}

func appendOnce(list []int, i int) []int {
	for k, x := range list {
		if x == i {
			return list
		}
		if x > i { // kept sorted: the map is walked in any order
			return append(list[:k], append([]int{i}, list[k:]...)...)
		}
	}
	return append(list, i)
}

// noSizes says nothing of the sizes of values: all of them are numbers.
type noSizes struct{}

func (noSizes) EstimateSize(cost.AstNode) *cost.SizeEstimate { return nil }
func (noSizes) EstimateCallCost(string, string, *cost.AstNode, []cost.AstNode) *cost.CallEstimate {
	return nil
}

type celCheck struct {
	program cel.Program
	place   map[string]int
	needs   []int // places of the values it names, ascending
}

// Outcome asks the expression. One that goes wrong, by a text that is no number for instance, is RuleBroken.
func (c *celCheck) Outcome(values []float64) Outcome {
	for _, i := range c.needs {
		if math.IsNaN(values[i]) {
			return NoValue
		}
	}
	out, _, err := c.program.Eval(&localMinute{c.place, values})
	if err != nil {
		return RuleBroken
	}
	if out == types.True {
		return Miss
	}
	return Pass
}

// A localMinute gives the values of a minute by their names.
type localMinute struct {
	place  map[string]int
	values []float64
}

func (m *localMinute) ResolveName(name string) (any, bool) {
	i, ok := m.place[name]
	if !ok {
		return nil, false
	}
	return types.Double(m.values[i]), true
}

func (m *localMinute) Parent() cel.Activation { return nil }
