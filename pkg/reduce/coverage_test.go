package reduce_test

import (
	"context"
	"math"
	"sort"
	"testing"

	"example.org/guardring/pkg/reduce"
)

// coverageLawOnlyByTrials names datasets in which one rectangular input carries
// most of the variance: only their Monte Carlo interval is judged.
var coverageLawOnlyByTrials = map[string]bool{}

// notConfounded names datasets in which a shared input moves rows in a way that no
// parameter can follow: its error then shows in the residuals, where the
// covariance of the readings, by the four kinds of error, does not have it.
var notConfounded = map[string]string{
	"field-meter": "errors of the spacing and of the head image differ between the two spacings",
}

// TestTruthIsRecovered reduces every dataset: the truth that its readings were
// made from must lie within three standard uncertainties of every measurand.
func TestTruthIsRecovered(t *testing.T) {
	for _, w := range worlds(t) {
		r, err := reduce.Run(context.Background(), w.b, reduce.Settings{LawOnly: true})
		if err != nil {
			t.Error(err)
			continue
		}
		if len(r.Record.Measurands) == 0 {
			t.Errorf("%s: no measurand is stated: %v", w.name, r.Record.Warnings)
		}
		for n, m := range r.Record.Measurands {
			truth := w.trueMeasurand(t, n)
			pull := (float64(m.Value) - truth) / float64(m.U)
			t.Logf("%s: %s = %g, u = %g (%.2f %%), truth %g, pull %.2f; p = %.3f", w.name, m.Name, m.Value, m.U, 100*math.Abs(float64(m.U/m.Value)), truth, pull, r.Record.Fit.PValue)
			if !(math.Abs(pull) < 3) {
				t.Errorf("%s: %s misses the truth by %.2f standard uncertainties", w.name, m.Name, pull)
			}
		}
	}
}

// TestCoverageLaw is the fair coverage test: the truth is fixed, every run
// redraws the stated values about it and all noise, and the interval of the law
// must hold the truth as often as it claims. The reference is the definition of
// a coverage probability (JCGM 100:2008 6.2.2).
func TestCoverageLaw(t *testing.T) {
	for _, w := range worlds(t) {
		if coverageLawOnlyByTrials[w.name] {
			continue
		}
		t.Run(w.name, func(t *testing.T) {
			t.Parallel()
			if testing.Short() && w.name != "attracted-disc" {
				t.Skip("-short: one kind stands for all")
			}
			truth := w.trueMeasurand(t, 0)
			const runs = 2000
			in := 0
			var sum, sum2 float64
			p := make([]float64, 0, runs)
			for run := range runs {
				r, err := reduce.Run(context.Background(), w.draw(t, uint64(run)), reduce.Settings{LawOnly: true})
				if err != nil {
					t.Fatal(err)
				}
				m := r.Record.Measurands[0]
				if float64(m.Interval[0]) <= truth && truth <= float64(m.Interval[1]) {
					in++
				}
				pull := (float64(m.Value) - truth) / float64(m.U)
				sum += pull
				sum2 += pull * pull
				p = append(p, float64(r.Record.Fit.PValue))
			}
			share := float64(in) / runs
			mean := sum / runs
			sd := math.Sqrt(sum2/runs - mean*mean)
			t.Logf("%.2f %% of the intervals hold the truth; pulls %.3f ± %.3f", 100*share, mean, sd)
			if share < 0.94 || share > 0.97 {
				t.Errorf("%.2f %% of the 95.45 %% intervals hold the truth, want 94 to 97", 100*share)
			}
			if math.Abs(mean) >= 0.08 || sd < 0.95 || sd > 1.05 {
				t.Errorf("pulls: mean %.3f, standard deviation %.3f; want |mean| < 0.08 and 0.95 to 1.05", mean, sd)
			}
			if why := notConfounded[w.name]; why != "" {
				t.Logf("the chi-squared probabilities are not judged: %s", why)
				return
			}
			if math.IsNaN(p[0]) {
				return // noise from the residuals: chi-squared has no probability
			}
			// Chi-squared probabilities are uniform: Kolmogorov–Smirnov at 0.001.
			sort.Float64s(p)
			var d float64
			for i, v := range p {
				d = max(d, math.Abs(v-float64(i)/runs), math.Abs(v-float64(i+1)/runs))
			}
			if limit := 1.9495 / math.Sqrt(runs); d > limit {
				t.Errorf("chi-squared probabilities depart from uniform by %.4f, more than %.4f (Kolmogorov–Smirnov, p = 0.001)", d, limit)
			}
		})
	}
}

// TestCoverageMonteCarlo is the same for the Monte Carlo interval.
func TestCoverageMonteCarlo(t *testing.T) {
	for _, w := range worlds(t) {
		t.Run(w.name, func(t *testing.T) {
			t.Parallel()
			if testing.Short() && w.name != "attracted-disc" {
				t.Skip("-short: one kind stands for all")
			}
			truth := w.trueMeasurand(t, 0)
			const runs = 400
			in := 0
			for run := range runs {
				r, err := reduce.Run(context.Background(), w.draw(t, 1e6+uint64(run)), reduce.Settings{Trials: 1000, Seed: uint64(run)})
				if err != nil {
					t.Fatal(err)
				}
				m := r.Record.Measurands[0].MonteCarlo
				if float64(m.Interval[0]) <= truth && truth <= float64(m.Interval[1]) {
					in++
				}
			}
			share := float64(in) / runs
			t.Logf("%.2f %% of the Monte Carlo intervals hold the truth", 100*share)
			if share < 0.925 || share > 0.985 {
				t.Errorf("%.2f %% of the 95.45 %% Monte Carlo intervals hold the truth, want 92.5 to 98.5", 100*share)
			}
		})
	}
}
