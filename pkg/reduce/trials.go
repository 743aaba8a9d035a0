package reduce

import (
	"context"
	"fmt"
	"math"
	"runtime"
	"sync"
	"sync/atomic"

	"example.org/guardring/pkg/cell"
	"example.org/guardring/pkg/gum"
	"example.org/guardring/pkg/jet"
	"example.org/guardring/pkg/lsq"
	"example.org/guardring/pkg/random"
)

// trialStream names the random streams of the trials of a reduction.
const trialStream = "reduction"

// maxTrialValues bounds the memory of the trials, 8 bytes a value.
const maxTrialValues = 100_000_000

// trialBlock is how many trials one core takes at a time.
const trialBlock = 32

// trials repeats the whole chain and returns the measurands [measurand][trial];
// trials whose fit failed hold NaN and are counted.
func (c *chain) trials(ctx context.Context, r *lsq.Result, k *carried, seed uint64, n int) ([][]float64, int, error) {
	if n > maxTrialValues/max(1, len(c.m.Measurands)) {
		return nil, 0, fmt.Errorf("%d trials of %d measurands are more than the %d values that are kept to find intervals from; ask for fewer trials", n, len(c.m.Measurands), maxTrialValues)
	}
	out := make([][]float64, len(c.m.Measurands))
	for m := range out {
		out[m] = make([]float64, n)
	}
	joint, err := c.joint()
	if err != nil {
		return nil, 0, err
	}
	var wg sync.WaitGroup
	var next, done, failed atomic.Int64
	var firstErr error
	var once sync.Once
	for range min(runtime.GOMAXPROCS(0), (n+trialBlock-1)/trialBlock) {
		wg.Add(1)
		go func() {
			defer wg.Done()
			defer func() {
				if p := recover(); p != nil {
					once.Do(func() { firstErr = fmt.Errorf("a trial failed: %v", p) })
				}
			}()
			w := c.newWorker(r, k, joint)
			y := make([]float64, len(out))
			for ctx.Err() == nil {
				hi := int(next.Add(trialBlock))
				lo := hi - trialBlock
				if lo >= n {
					return
				}
				hi = min(hi, n)
				for t := lo; t < hi; t++ {
					if !w.trial(seed, uint64(t), y) {
						failed.Add(1)
						for m := range y {
							y[m] = math.NaN()
						}
					}
					for m := range y {
						out[m][t] = y[m]
					}
				}
				cell.Report(ctx, "Monte Carlo", done.Add(int64(hi-lo)), int64(n))
			}
		}()
	}
	wg.Wait()
	if firstErr != nil {
		return nil, 0, firstErr
	}
	if err := ctx.Err(); err != nil {
		return nil, 0, cell.Stopped(fmt.Sprintf("after %d of %d Monte Carlo trials", done.Load(), n), err)
	}
	return out, int(failed.Load()), nil
}

// joint prepares the drawing of the inputs with their correlations.
func (c *chain) joint() (*gum.Joint, error) {
	d := make([]gum.Distribution, len(c.inputs))
	for i, in := range c.inputs {
		d[i] = in.dist
	}
	var corr []gum.Correlation
	for _, r := range c.b.Correlations {
		i, j := c.inputNamed(r.A), c.inputNamed(r.B)
		if i >= 0 && j >= 0 {
			corr = append(corr, gum.Correlation{I: i, J: j, R: r.R})
		}
	}
	return gum.NewJoint(d, corr)
}

// worker holds what one core needs for trials.
type worker struct {
	c            *chain
	k            *carried
	joint        *gum.Joint
	refit        *lsq.Refitter
	pred         *predictor
	q            []float64
	x            [][]float64
	y            []float64
	draws        []float64
	noise        []float64
	theta        []float64
	prior        []float64
	qj           []jet.Jet
	gain, offset float64
	gains        []float64 // of the predictors
	offsets      []float64
	factor       map[string]float64
	eval         func(theta, f []float64, jac [][]float64) error
}

func (c *chain) newWorker(r *lsq.Result, k *carried, joint *gum.Joint) *worker {
	n := len(c.record)
	w := &worker{c: c, k: k, joint: joint, refit: r.NewRefitter(), pred: newPredictor(c.m, len(c.q), len(c.x), c.free),
		q: append([]float64(nil), k.q...), x: grid(len(c.x), n), y: make([]float64, n),
		draws: make([]float64, len(c.inputs)), theta: make([]float64, len(c.free)), prior: make([]float64, len(c.free)),
		qj: make([]jet.Jet, len(c.q)), gains: make([]float64, len(c.pred)), offsets: make([]float64, len(c.pred)), factor: map[string]float64{}}
	longest := n
	for i := range c.comps {
		longest = max(longest, c.comps[i].count)
	}
	w.noise = make([]float64, longest)
	w.eval = func(theta, f []float64, jac [][]float64) error {
		for j, i := range c.free {
			w.q[i] = theta[j]
		}
		w.pred.rows(w.q, w.x, 0, n, f, jac)
		toIndication(w.gain, w.offset, 0, n, f, jac)
		return nil
	}
	return w
}

// trial draws everything once, fits, and fills y with the measurands. It
// reports whether the fit succeeded.
func (w *worker) trial(seed, number uint64, y []float64) bool {
	c := w.c
	src := random.New(seed, trialStream, number)
	w.drawInputs(&src)
	for p := range c.pred {
		g, o := w.gains[p], w.offsets[p]
		for i, r := range c.xr[p] {
			w.x[p][i] = g*r + o
		}
	}
	for p := len(c.pred); p < len(c.x); p++ {
		copy(w.x[p], c.x[p])
	}
	copy(w.y, c.y)
	clear(w.factor)
	for n := range c.comps {
		w.drawComponent(&src, &c.comps[n])
	}
	copy(w.theta, w.k.theta)
	if _, err := w.refit.Fit(w.y, w.prior, w.eval, w.theta); err != nil {
		return false
	}
	for j, i := range c.free {
		w.q[i] = w.theta[j]
	}
	for i, v := range w.q {
		w.qj[i] = jet.Const(v)
	}
	for m := range y {
		y[m] = c.m.Measurands[m].Value(w.qj).V
		if math.IsNaN(y[m]) || math.IsInf(y[m], 0) {
			return false
		}
	}
	return true
}

// drawInputs draws the shared inputs and the prior values.
func (w *worker) drawInputs(src *random.Source) {
	c := w.c
	w.joint.Sample(src, w.draws)
	w.gain, w.offset = gainOffset(&c.b.Channels[c.resp])
	for p, ci := range c.pred {
		w.gains[p], w.offsets[p] = gainOffset(&c.b.Channels[ci])
	}
	for s := range c.inputs {
		for _, t := range c.inputs[s].targets {
			if t.kind == scalarInput {
				w.q[t.index] = w.k.q[t.index]
			}
		}
	}
	for s := range c.inputs {
		in, v := &c.inputs[s], w.draws[s]
		switch in.kind {
		case scalarInput:
			if in.squared {
				v *= v
			}
			w.q[in.index] = v
		case priorInput:
			for j, f := range c.free {
				if f == in.index {
					w.prior[j] = v
				}
			}
		case gainInput:
			if in.index < 0 {
				w.gain = v
			} else {
				w.gains[in.index] = v
			}
		case offsetInput:
			if in.index < 0 {
				w.offset = v
			} else {
				w.offsets[in.index] = v
			}
		}
	}
	w.moveDraws()
}

// drawComponent adds one draw of a component to the readings.
func (w *worker) drawComponent(src *random.Source, comp *component) {
	c := w.c
	scale := 1.0
	if nu := comp.dof; !comp.flat && !math.IsInf(nu, 1) && nu > 0 {
		// One estimate of the standard deviation serves all draws of the block.
		block := c.block(comp)
		f, ok := w.factor[block]
		if !ok {
			f = math.Sqrt(nu / (2 * src.Gamma(nu/2)))
			w.factor[block] = f
		}
		scale = f
	}
	draw := func(n int) []float64 {
		e := w.noise[:n]
		if comp.flat {
			src.FillUniform(e)
			for i := range e {
				e[i] = 2 * math.Sqrt(3) * (e[i] - 0.5)
			}
		} else {
			src.FillNormal(e)
		}
		return e
	}
	if comp.channel == zeroComponent {
		e := draw(comp.count)
		s := scale * c.zeroNoise()
		shares := c.zero.shares()
		for i := range w.y {
			column, weight := shares.row(i)
			for j, col := range column {
				w.y[i] -= weight[j] * c.zero.unit[col] * s * e[col]
			}
		}
		return
	}
	target := w.y
	if comp.on >= 0 {
		target = w.x[comp.on]
	}
	if comp.group != nil {
		e := draw(comp.count)
		for i, g := range comp.group {
			target[i] += scale * comp.u(i) * e[g]
		}
		return
	}
	e := draw(len(target))
	for i := range target {
		target[i] += scale * comp.u(i) * e[i]
	}
}
