package absorbers

import "math"

// Thin lines crowd: runs of bins without light need no damped system. Their
// chance, beside the Gaussian scatter of the level, is that of a chain of two
// states. A dark bin has darkPart of the level or less; a run begins with chance
// runBegins (1 - T)^2 at mean transmission T, at least runLeast, and goes on for
// another bin with chance runStays. The numbers are those of made-up forests of
// the observed mean transmission with lines in groups (quasars_test.go).
const (
	darkPart            = 0.1
	runBegins, runLeast = 0.3, 0.004
	runStays            = 0.75
)

// runStay is -2 ln of the chance that a run goes on.
var runStay = -2 * math.Log(runStays)

// runBegin returns -2 ln of the chance that a run begins at mean transmission t.
func runBegin(t float64) float64 {
	return -2 * math.Log(max(runBegins*(1-t)*(1-t), runLeast))
}

// darkCost returns -2 ln likelihood of a bin within a run.
func (s *Scratch) darkCost(i int, level float64) float64 {
	fo := &s.forest
	if fo.noise[i] == 0 {
		return 0
	}
	sd := darkPart * level
	variance := fo.noise[i] + sd*sd
	r := fo.flux[i]
	return r*r/variance + math.Log(variance)
}

// emptyCosts writes into cost, which has one element more than the bins from lo to
// hi, the running sum of -2 ln likelihood of the best chain of states without a
// damped system, for a level of each bin given by level.
func (s *Scratch) emptyCosts(cost []float64, lo, hi int, level func(i int) float64) {
	n := hi - lo
	s.darkFrom, s.darkOwn, s.lightOwn = resize(s.darkFrom, n), resize(s.darkOwn, n), resize(s.lightOwn, n)
	if cap(s.inRun) < n {
		s.inRun = make([]bool, n+n/2)
	}
	s.inRun = s.inRun[:n]
	var light, dark float64
	dark = math.Inf(1)
	// Where darkFrom is below 0 the run came from the bin before; where inRun is
	// true the light state did.
	for k := range n {
		i := lo + k
		l := level(i)
		begin, stay := s.forest.begin[i], runStay
		s.lightOwn[k], s.darkOwn[k] = s.cost(i, l, 1), s.darkCost(i, l)
		fresh, on := light+begin, dark+stay
		s.darkFrom[k] = on - fresh
		s.inRun[k] = dark < light // where light at k comes from
		light = min(light, dark) + s.lightOwn[k]
		dark = min(fresh, on) + s.darkOwn[k]
	}
	// Back along the best chain.
	run := dark < light
	for k := n - 1; k >= 0; k-- {
		i := lo + k
		if run {
			if s.darkFrom[k] < 0 {
				cost[k+1] = s.darkOwn[k] + runStay
			} else {
				cost[k+1], run = s.darkOwn[k]+s.forest.begin[i], false
			}
		} else {
			cost[k+1] = s.lightOwn[k]
			run = s.inRun[k]
		}
	}
	cost[0] = 0
	for k := range n {
		cost[k+1] += cost[k]
	}
}
