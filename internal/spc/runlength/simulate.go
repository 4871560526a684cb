package runlength

import (
	"math"
	"math/rand/v2"
	"runtime"
	"sync"
	"sync/atomic"

	"holdfast/internal/spc/watch"
)

const (
	chunkRuns    = 16      // runs that share one stream of random numbers
	firstWave    = 8       // chunks before the first look at the precision
	largestWave  = 512     // chunks between two looks
	wantedError  = 0.01    // relative standard error at which a simulation stops
	leastRuns    = 1024    // below this the standard error itself is too uncertain
	leastSignals = 30      // fewer signals than this are no basis for an answer
	pause        = 1 << 16 // points between two questions whether to stop
)

// process simulates one run from an empty history: it returns the number of
// points up to the first signal, or false when limit points brought none.
type process func(rng *rand.Rand, limit int) (points int, signalled bool)

// ruleProcess simulates a normal statistic judged by run rules.
func ruleProcess(rules *watch.Rules, shift float64) func() process {
	return func() process {
		return func(rng *rand.Rand, limit int) (int, bool) {
			var s watch.State
			for n := 1; n <= limit; n++ {
				z := shift + rng.NormFloat64()
				if rules.Step(&s, watch.Point{Z: z, X: z}).Any() {
					return n, true
				}
			}
			return limit, false
		}
	}
}

// chunk is the outcome of the runs of one stream.
type chunk struct {
	lengths []int
	points  int
	cut     bool // the points ran out, or the caller wanted to stop
	stopped bool
}

// simulate repeats runs until the standard error of the mean is 1 %, the points
// are used up, or the caller wants to stop. Runs come in chunks, each with its own
// stream of random numbers, and chunks in waves whose size depends on results
// only: the answer does not depend on how many cores work on it.
//
// When signals are so rare that a wave cannot finish, the mean is the points made
// over the signals seen, and the run length is taken as geometric: at such lengths
// the start of a history no longer matters.
func simulate(opt Options, newProcess func() process) (RunLength, error) {
	var lengths []int
	points, done := 0, 0
	for wave := firstWave; ; {
		chunks, stopped := runWave(opt, newProcess, done, wave, (opt.points()-points)/wave)
		if stopped && len(lengths) == 0 {
			chunks = keepUncut(chunks)
		} else if stopped {
			break
		}
		cut, signals, made := false, 0, 0
		for _, c := range chunks {
			cut = cut || c.cut
			signals += len(c.lengths)
			made += c.points
		}
		points += made
		if cut && len(lengths) == 0 {
			return geometric(made, signals)
		}
		if cut {
			break // keep the complete waves; a cut one favours short runs
		}
		for _, c := range chunks {
			lengths = append(lengths, c.lengths...)
		}
		done += wave
		if len(lengths) < 2 {
			return RunLength{}, invalid("the simulation was stopped before it had an answer")
		}
		r := fromSample(lengths)
		if stopped || (len(lengths) >= leastRuns && r.StandardError <= wantedError*r.Mean) {
			return r, nil
		}
		wave = nextWave(r, len(lengths), opt.points()-points)
		if wave == 0 {
			break
		}
	}
	return fromSample(lengths), nil
}

// keepUncut drops the chunks that were stopped in the middle.
func keepUncut(all []chunk) []chunk {
	var out []chunk
	for _, c := range all {
		if !c.stopped {
			out = append(out, c)
		}
	}
	return out
}

// nextWave is the number of chunks that should bring the error down to what is
// wanted, as far as the points left allow; 0 when they do not.
func nextWave(r RunLength, runs, pointsLeft int) int {
	ratio := r.StandardError / (wantedError * r.Mean)
	want := math.Max(float64(runs)*(ratio*ratio-1)*1.05, float64(leastRuns-runs))
	wave := int(math.Ceil(math.Min(want/chunkRuns, largestWave)))
	// A wave that is cut is lost: leave room for runs longer than the mean.
	afford := int(float64(pointsLeft) / (2 * chunkRuns * r.Mean))
	return min(max(wave, 1), afford)
}

// geometric is the run length of a chart that signals too seldom for complete
// runs.
func geometric(points, signals int) (RunLength, error) {
	if signals < leastSignals {
		return RunLength{}, invalid("signals are too rare to simulate: %d in %d points", signals, points)
	}
	mean := float64(points) / float64(signals)
	return RunLength{
		Mean:          mean,
		StandardError: mean / math.Sqrt(float64(signals)),
		Method:        Simulated,
		curve:         known([]float64{1}, 1/mean),
	}, nil
}

// runWave runs chunks number first to first+count-1 on all cores, each for at
// most limit points.
func runWave(opt Options, newProcess func() process, first, count, limit int) (out []chunk, stopped bool) {
	out = make([]chunk, count)
	parallel(count, func() func(int) {
		run := newProcess()
		return func(i int) {
			out[i] = runChunk(opt, run, rand.New(rand.NewPCG(opt.Seed, uint64(first+i))), limit)
		}
	})
	for _, c := range out {
		stopped = stopped || c.stopped
	}
	return out, stopped
}

// runChunk makes chunkRuns runs of together at most limit points.
func runChunk(opt Options, run process, rng *rand.Rand, limit int) (c chunk) {
	if opt.stopped() {
		return chunk{cut: true, stopped: true}
	}
	asked := 0
	for range chunkRuns {
		n, signalled := run(rng, limit-c.points)
		c.points += n
		if !signalled {
			c.cut = true
			return c
		}
		c.lengths = append(c.lengths, n)
		if c.points-asked >= pause {
			if asked = c.points; opt.stopped() {
				c.cut, c.stopped = true, true
				return c
			}
		}
	}
	return c
}

// parallel does work number 0 to count-1 on all cores. Each core makes its own
// worker.
func parallel(count int, newWorker func() func(i int)) {
	var at atomic.Int64
	var wg sync.WaitGroup
	for range min(count, runtime.GOMAXPROCS(0)) {
		wg.Go(func() {
			work := newWorker()
			for i := int(at.Add(1)) - 1; i < count; i = int(at.Add(1)) - 1 {
				work(i)
			}
		})
	}
	wg.Wait()
}
