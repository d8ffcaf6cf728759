package study

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"

	"yearflow/sim/results"
)

// The search, in this order:
//
//  1. The base as it stands is candidate 0.
//  2. Where the whole grid of settings fits into the budget, all of it is evaluated.
//  3. Else differential evolution, DE/rand/1/bin with synchronous generations (Storn and
//     Price, Differential Evolution, Journal of Global Optimization 11, 1997), on the
//     levels of the grid: a mutant a + F·(b − c) is rounded to levels and reflected at
//     the bounds. It begins from the grid point nearest to the base and a Latin hypercube
//     (McKay, Beckman, Conover, Technometrics 21, 1979). A trial that is known already is
//     drawn again a few times, for a coarse grid has many of these.
//  4. Compass search from the best (Kolda, Lewis, Torczon, SIAM Review 45, 2003): one step
//     either way in every setting, half the step where none is better, until no neighbour
//     on the grid is.
//  5. One setting at a time around the best, for the sensitivities.
//  6. With the budget that is left but for new profiles: one step in two settings at once
//     (of settings that can stand in for each other, such as a set voltage and its
//     compensation), then the evolution again from the best and a new hypercube. Where any
//     of these finds a better one, 4 to 6 again.
//
// Candidates are held against each other by the rules of Deb (Computer Methods in Applied
// Mechanics and Engineering 186, 2000): one that keeps the limits beats one that does not,
// of two that do not the smaller violation wins, of two that do the lower score.
// Every random number is drawn before a batch is handed to the workers, and a candidate
// counts against the budget whether it is run or taken from the log: the result depends
// neither on the number of workers nor on having been stopped.
const (
	mutationFactor = 0.7 // F; 0.5 to 1 in Storn and Price
	crossover      = 0.9 // CR
	populationPer  = 5   // members for each setting; 5 to 10 there
	redraws        = 8   // of a trial that is known
	idleRounds     = 3   // generations without a new candidate end the evolution
	profilePoints  = 9   // values of a setting that a profile has at most
	evolutionShare = 0.6 // of the budget, at most
)

// Point is a candidate.
type Point struct {
	Number    int
	Origin    string    // base, start, grid, evolution, compass, pairs, profile
	Levels    []int     // by knob; nil for a base that is not on the grid
	Values    []float64 // by knob; NaN where the units of the base have different values
	Invalid   string    // why no sheet can hold it
	Sums      results.Sums
	Score     float64 // NaN where a quantity is not known
	Violation float64 // of all limits, each as a share of its limit; 0: all are kept
	Broken    []string
	moves     int // settings that differ from the base
}

// Feasible tells whether all limits are kept.
func (p *Point) Feasible() bool { return p.Invalid == "" && p.Violation == 0 && !math.IsNaN(p.Score) }

// better tells whether p is to be preferred to o: never for equals.
func (p *Point) better(o *Point) bool {
	rank := func(p *Point) int {
		switch {
		case p.Invalid != "" || math.IsNaN(p.Score):
			return 2
		case p.Violation > 0:
			return 1
		}
		return 0
	}
	switch a, b := rank(p), rank(o); {
	case o == p:
		return false
	case a != b:
		return a < b
	case a == 1 && p.Violation != o.Violation:
		return p.Violation < o.Violation
	case a < 2 && p.Score != o.Score:
		return p.Score < o.Score
	case p.moves != o.moves:
		return p.moves < o.moves // what changes less is preferred
	}
	return p.Number < o.Number
}

// search is one search under way.
type search struct {
	spec  *TuneSpec
	all   []tuneQuantity
	ev    *evaluator
	rng   *rand.Rand
	base  *Point
	best  *Point // of those within the bounds; nil before the first
	seen  []*Point
	index map[string]*Point
	spent int
	tell  func(*search)
}

// run searches and says why it ended.
func (s *search) run(ctx context.Context) (string, error) {
	base, err := s.ask(ctx, "base", [][]int{nil})
	if err != nil {
		return "", err
	}
	s.base = base[0]
	if s.base.Invalid != "" {
		return "", fmt.Errorf("the base cannot be run: %s", s.base.Invalid)
	}
	grid := 1.0
	for i := range s.spec.Knobs {
		grid *= float64(s.spec.Knobs[i].Levels())
	}
	if grid <= float64(s.left()) {
		return "every candidate of the grid was evaluated", s.enumerate(ctx)
	}
	if _, err := s.ask(ctx, "start", [][]int{s.start()}); err != nil {
		return "", err
	}
	reserve := 0
	for i := range s.spec.Knobs {
		reserve += min(s.spec.Knobs[i].Levels(), profilePoints) - 1
	}
	reserve = min(reserve, s.spec.Budget/4)
	if err := s.evolve(ctx, min(int(evolutionShare*float64(s.spec.Budget)), s.left()-reserve)); err != nil {
		return "", err
	}
	var profiled *Point
	for s.left() > 0 && s.best != nil {
		was := s.best
		if err := s.compass(ctx, was == s.index[s.ev.key(s.values(s.start()))]); err != nil {
			return "", err
		}
		if s.best != profiled {
			profiled = s.best
			if err := s.profile(ctx); err != nil {
				return "", err
			}
			if s.best != profiled {
				continue
			}
		}
		seen := len(s.seen)
		if err := s.pairs(ctx); err != nil {
			return "", err
		}
		if s.best != profiled || s.left() == 0 {
			continue
		}
		if s.left() <= reserve {
			return fmt.Sprintf("the budget of %d candidate-years is spent but for %d kept for profiles, which the best has", s.spec.Budget, s.left()), nil
		}
		if err := s.evolve(ctx, s.left()-reserve); err != nil {
			return "", err
		}
		if s.best == profiled && len(s.seen) == seen {
			return "no neighbour of the best on the grid is better, nor anything that the evolution still finds", nil
		}
	}
	if s.best == nil && s.left() > 0 {
		return "no candidate within the bounds can be a settings sheet", nil
	}
	return fmt.Sprintf("the budget of %d candidate-years is spent", s.spec.Budget), nil
}

func (s *search) left() int { return s.spec.Budget - s.spent }

func (s *search) values(levels []int) []float64 {
	if levels == nil {
		return nil
	}
	out := make([]float64, len(levels))
	for i, l := range levels {
		out[i] = s.spec.Knobs[i].value(l)
	}
	return out
}

// start is the grid point nearest to the base, of units that differ to their mean.
func (s *search) start() []int {
	out := make([]int, len(s.spec.Knobs))
	for i := range out {
		k := &s.spec.Knobs[i]
		sum := 0.0
		for t := range k.targets {
			sum += k.of(s.ev.model, &k.targets[t])
		}
		out[i] = k.nearest(sum / float64(len(k.targets)))
	}
	return out
}

// ask evaluates candidates, as many as the budget allows: the others are nil. nil levels
// stand for the base.
func (s *search) ask(ctx context.Context, origin string, list [][]int) ([]*Point, error) {
	out := make([]*Point, len(list))
	keys := make([]string, len(list))
	var fresh []int
	asked := map[string]bool{}
	for i, l := range list {
		keys[i] = s.ev.key(s.values(l))
		if p := s.index[keys[i]]; p != nil {
			if p.Levels == nil && l != nil {
				p.Levels = slices.Clone(l) // the base is on the grid
				s.keepBest(p)
			}
		} else if !asked[keys[i]] && len(fresh) < s.left() {
			asked[keys[i]] = true
			fresh = append(fresh, i)
		}
	}
	values := make([][]float64, len(fresh))
	for k, i := range fresh {
		values[k] = s.values(list[i])
	}
	done, err := s.ev.batch(ctx, values)
	if err != nil {
		return nil, err
	}
	for k, i := range fresh {
		s.add(origin, keys[i], list[i], values[k], &done[k])
	}
	for i := range list {
		out[i] = s.index[keys[i]]
	}
	if s.tell != nil && len(fresh) > 0 {
		s.tell(s)
	}
	return out, nil
}

// add judges a candidate. One that no sheet can hold costs nothing.
func (s *search) add(origin, key string, levels []int, values []float64, e *evaluation) {
	p := &Point{Number: len(s.seen), Origin: origin, Levels: slices.Clone(levels), Values: values, Invalid: e.invalid, Score: math.NaN()}
	for i := range s.spec.Knobs {
		k := &s.spec.Knobs[i]
		if values == nil {
			p.Values = append(p.Values, k.base(s.ev.model))
		} else if p.Values[i] != k.base(s.ev.model) {
			p.moves++
		}
	}
	if e.sums != nil {
		s.spent++
		p.Sums = *e.sums
		s.judge(p)
	}
	s.seen = append(s.seen, p)
	s.index[key] = p
	if levels != nil {
		s.keepBest(p)
	}
}

func (s *search) keepBest(p *Point) {
	if p.Invalid == "" && (s.best == nil || p.better(s.best)) {
		s.best = p
	}
}

// judge scores a candidate and holds it against the limits, of which one is always there:
// no more steps may be low or unsolved than in the base, for nothing of them is in any sum.
func (s *search) judge(p *Point) {
	p.Score = 0
	for _, w := range s.spec.Aims {
		p.Score += w.Weight * quantityNamed(s.all, w.Quantity).of(&p.Sums)
	}
	base := &p.Sums
	if s.base != nil {
		base = &s.base.Sums
	}
	broken := func(what string, by, limit float64) {
		if by > 1e-9*math.Abs(limit) || by != by {
			p.Violation += by / math.Max(math.Abs(limit), 1)
			p.Broken = append(p.Broken, what)
		}
	}
	for _, l := range s.spec.Limits {
		of := quantityNamed(s.all, l.Quantity).of
		limit, sign := l.value(of(base))
		broken(l.Quantity, sign*(of(&p.Sums)-limit), limit)
	}
	broken("low and unsolved steps", float64(p.Sums.Low+p.Sums.Unsolved-base.Low-base.Unsolved), 0)
	if math.IsNaN(p.Violation) {
		p.Violation = math.Inf(1) // a limited quantity is not known
	}
}

// value returns the limit, and −1 where it is a lower one.
func (l *TuneLimit) value(base float64) (limit, sign float64) {
	p, sign := l.AtMost, 1.0
	if p == nil {
		p, sign = l.AtLeast, -1
	}
	if l.OfBase {
		return base, sign
	}
	return *p, sign
}

// enumerate evaluates the whole grid, the last setting turning fastest.
func (s *search) enumerate(ctx context.Context) error {
	n := len(s.spec.Knobs)
	var all [][]int
	now := make([]int, n)
	for {
		all = append(all, slices.Clone(now))
		i := n - 1
		for ; i >= 0; i-- {
			if now[i]++; now[i] < s.spec.Knobs[i].Levels() {
				break
			}
			now[i] = 0
		}
		if i < 0 {
			break
		}
	}
	for part := range slices.Chunk(all, 64) {
		if _, err := s.ask(ctx, "grid", part); err != nil {
			return err
		}
	}
	return nil
}
