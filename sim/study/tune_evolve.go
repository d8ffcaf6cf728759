package study

import (
	"context"
	"math"
	"slices"
)

// evolve is differential evolution within a part of the budget, from the best so far.
func (s *search) evolve(ctx context.Context, budget int) error {
	n := len(s.spec.Knobs)
	size := min(max(populationPer*n, 8), 40, budget/4)
	if size < 4 { // a mutant is made of three others
		return nil
	}
	end := s.spent + budget
	first := s.start()
	if s.best != nil {
		first = s.best.Levels
	}
	list := append([][]int{first}, s.hypercube(size-1)...)
	population, err := s.ask(ctx, "start", list)
	if err != nil {
		return err
	}
	for idle := 0; idle < idleRounds && s.spent < end; {
		seen := len(s.seen)
		trials := make([][]int, size)
		drawn := map[string]bool{}
		for i := range trials {
			for range redraws {
				trials[i] = s.trial(list, i)
				if key := s.ev.key(s.values(trials[i])); s.index[key] == nil && !drawn[key] {
					drawn[key] = true
					break
				}
			}
		}
		if room := end - s.spent; len(trials) > room {
			trials = trials[:room]
		}
		points, err := s.ask(ctx, "evolution", trials)
		if err != nil {
			return err
		}
		for i, p := range points {
			if p != nil && p.Invalid == "" && (population[i] == nil || p.better(population[i])) {
				population[i], list[i] = p, trials[i]
			}
		}
		idle++
		if len(s.seen) > seen {
			idle = 0
		}
	}
	return nil
}

// hypercube draws points of which every setting has one in each of as many equal parts
// of its range.
func (s *search) hypercube(size int) [][]int {
	out := make([][]int, size)
	for i := range out {
		out[i] = make([]int, len(s.spec.Knobs))
	}
	for k := range s.spec.Knobs {
		levels := float64(s.spec.Knobs[k].Levels())
		for i, part := range s.rng.Perm(size) {
			at := (float64(part) + s.rng.Float64()) / float64(size)
			out[i][k] = min(int(at*levels), int(levels)-1)
		}
	}
	return out
}

// trial is a + F·(b − c) of three others, crossed with the member itself.
func (s *search) trial(list [][]int, i int) []int {
	var of [3]int
	for k := range of {
		for {
			of[k] = s.rng.IntN(len(list))
			if of[k] != i && !slices.Contains(of[:k], of[k]) {
				break
			}
		}
	}
	out := slices.Clone(list[i])
	forced := s.rng.IntN(len(out))
	for k := range out {
		if r := s.rng.Float64(); r >= crossover && k != forced {
			continue
		}
		x := float64(list[of[0]][k]) + mutationFactor*float64(list[of[1]][k]-list[of[2]][k])
		out[k] = reflected(int(math.Round(x)), s.spec.Knobs[k].Levels())
	}
	return out
}

// reflected folds a level back into 0 … levels − 1.
func reflected(x, levels int) int {
	if levels == 1 {
		return 0
	}
	period := 2 * (levels - 1)
	if x = ((x % period) + period) % period; x >= levels {
		x = period - x
	}
	return x
}

// compass polls one step either way in every setting and moves to the best of them; the
// step is halved where none is better. It begins with a quarter of the range where the
// best is still the start, else with a step of one.
func (s *search) compass(ctx context.Context, wide bool) error {
	step := 1
	if wide {
		for i := range s.spec.Knobs {
			step = max(step, s.spec.Knobs[i].Levels()/4)
		}
	}
	for s.left() > 0 {
		was := s.best
		var polls [][]int
		for i := range s.spec.Knobs {
			for _, d := range [2]int{-step, step} {
				if l := was.Levels[i] + d; l >= 0 && l < s.spec.Knobs[i].Levels() {
					p := slices.Clone(was.Levels)
					p[i] = l
					polls = append(polls, p)
				}
			}
		}
		if _, err := s.ask(ctx, "compass", polls); err != nil {
			return err
		}
		if s.best != was {
			continue
		}
		if step == 1 {
			return nil
		}
		step /= 2
	}
	return nil
}

// pairs polls one step in two settings at once, in an order that is drawn: of many
// settings not all pairs are seen.
func (s *search) pairs(ctx context.Context) error {
	at := s.best.Levels
	var polls [][]int
	for i := range at {
		for k := range i {
			for _, d := range [4][2]int{{-1, 1}, {1, -1}, {-1, -1}, {1, 1}} {
				a, b := at[i]+d[0], at[k]+d[1]
				if a < 0 || b < 0 || a >= s.spec.Knobs[i].Levels() || b >= s.spec.Knobs[k].Levels() {
					continue
				}
				p := slices.Clone(at)
				p[i], p[k] = a, b
				if s.index[s.ev.key(s.values(p))] == nil {
					polls = append(polls, p)
				}
			}
		}
	}
	s.rng.Shuffle(len(polls), func(i, j int) { polls[i], polls[j] = polls[j], polls[i] })
	_, err := s.ask(ctx, "pairs", polls)
	return err
}

// profile evaluates, for one setting after the other, values over its whole range with
// all others at the best: first the neighbours of all, then the rest.
func (s *search) profile(ctx context.Context) error {
	at := s.best.Levels
	var near, far [][]int
	for i := range s.spec.Knobs {
		levels := s.spec.Knobs[i].Levels()
		for _, l := range profileLevels(levels, at[i]) {
			p := slices.Clone(at)
			p[i] = l
			if l-at[i] <= 1 && at[i]-l <= 1 {
				near = append(near, p)
			} else {
				far = append(far, p)
			}
		}
	}
	_, err := s.ask(ctx, "profile", append(near, far...))
	return err
}

// profileLevels are at most profilePoints levels, with both ends and the neighbours of
// the best.
func profileLevels(levels, best int) (out []int) {
	if levels <= profilePoints {
		for l := range levels {
			out = append(out, l)
		}
		return out
	}
	out = append(out, max(best-1, 0), best, min(best+1, levels-1))
	even := profilePoints - 3
	for j := range even {
		out = append(out, int(math.Round(float64(j*(levels-1))/float64(even-1))))
	}
	slices.Sort(out)
	return slices.Compact(out)
}
