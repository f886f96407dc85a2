package analyses_test

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"testing"

	"github.com/stretchr/testify/require"

	"poise/analyses"
	"poise/netlist"
)

// workerCounts are numbers of workers that divide tasks and frequencies differently.
var workerCounts = []int{1, 2, 3, 8}

// withProcessors runs f as on a machine of n processors.
func withProcessors(n int, f func()) {
	defer runtime.GOMAXPROCS(runtime.GOMAXPROCS(n))
	f()
}

// sameForAllWorkers wants the same text from each number of workers. Numbers are written with as many digits as tell them from their
// neighbours, so equal texts are equal bits; NaN, which is not equal to itself, is compared too.
func sameForAllWorkers(t *testing.T, result func(workers int) string) {
	t.Helper()
	want := ""
	for _, n := range workerCounts {
		var got string
		withProcessors(n, func() { got = result(n) })
		if want == "" {
			want = got
		}
		if got != want {
			at := 0
			for at < min(len(got), len(want)) && got[at] == want[at] {
				at++
			}
			around := func(s string) string { return s[max(0, at-60):min(len(s), at+60)] }
			require.Failf(t, "not the same", "with %d workers: %q instead of %q", n, around(got), around(want))
		}
	}
	require.Greater(t, len(want), 100, "there is nothing to compare")
}

// loadAll loads the circuits of some folders of testdata.
func loadAll(t *testing.T, patterns ...string) []analyses.Job {
	var jobs []analyses.Job
	for _, pattern := range patterns {
		files, err := filepath.Glob("../testdata/" + pattern)
		require.NoError(t, err)
		require.NotEmpty(t, files, pattern)
		for _, f := range files {
			d, err := netlist.Load(os.DirFS(filepath.Dir(f)), filepath.Base(f))
			require.NoError(t, err)
			jobs = append(jobs, analyses.Job{File: filepath.ToSlash(f), Design: d})
		}
	}
	return jobs
}

// TestCheckOfManyFilesIsDeterministic checks many files at once, grids of temperatures and plots included.
func TestCheckOfManyFilesIsDeterministic(t *testing.T) {
	jobs := loadAll(t, "examples/*.poise", "reference/two_stage.poise", "hard/*.poise")
	sameForAllWorkers(t, func(workers int) string {
		r := analyses.Check(context.Background(), jobs, analyses.Options{Workers: workers, Plots: true})
		require.Zero(t, r.Totals.Error)
		for f := range r.Files {
			for b := range r.Files[f].Benches {
				r.Files[f].Benches[b].Elapsed = 0
			}
		}
		return fmt.Sprintf("%+v", r)
	})
}

// TestCurvesAreDeterministic: frequencies are shared out among as many goroutines as there are processors.
func TestCurvesAreDeterministic(t *testing.T) {
	for _, job := range loadAll(t, "examples/*.poise", "reference/pair.poise", "reference/two_stage.poise", "reference/geophone.poise") {
		t.Run(job.Design.Name, func(t *testing.T) {
			sameForAllWorkers(t, func(int) string {
				p, err := analyses.Curves(context.Background(), job.Design, nil, analyses.CurveOptions{Low: 1e-3, High: 1e10, PerDecade: 37})
				require.NoError(t, err)
				return fmt.Sprintf("%+v", p)
			})
		})
	}
}

// TestWaveformsAreDeterministic: the steps of a run depend on the circuit alone.
func TestWaveformsAreDeterministic(t *testing.T) {
	for _, job := range loadAll(t, "examples/*.poise", "reference/pair.poise") {
		for _, b := range job.Design.Benches {
			if !b.HasRun || b.Name == "carrier" { // which takes seconds and says no more than the others
				continue
			}
			t.Run(job.Design.Name+" "+b.Name, func(t *testing.T) {
				sameForAllWorkers(t, func(int) string {
					p, err := analyses.Waveforms(context.Background(), job.Design, b, analyses.WaveOptions{})
					require.NoError(t, err)
					return fmt.Sprintf("%+v", p)
				})
			})
		}
	}
}

// TestBiasIsDeterministic solves each circuit in several goroutines at once, which share what they may share.
func TestBiasIsDeterministic(t *testing.T) {
	jobs := loadAll(t, "hard/*.poise")
	sameForAllWorkers(t, func(workers int) string {
		texts := make([]string, len(jobs))
		var wait sync.WaitGroup
		for w := range workers {
			wait.Go(func() {
				for i := w; i < len(jobs); i += workers {
					c, err := jobs[i].Design.Circuit()
					if err != nil {
						texts[i] = err.Error()
						continue
					}
					r, err := analyses.Bias(context.Background(), c)
					texts[i] = fmt.Sprintf("%s %+v %v\n", jobs[i].File, r, err)
				}
			})
		}
		wait.Wait()
		return strings.Join(texts, "")
	})
}
