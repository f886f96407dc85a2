package analyses

import (
	"context"
	"errors"
	"log/slog"
	"runtime"
	"slices"
	"sync"
	"time"

	"poise/netlist"
)

// Job is one file to check: a loaded design, or why it could not be loaded.
type Job struct {
	File   string // path as given, slashes
	Design *netlist.Design
	Err    error // set if Design is nil
}

// Options say how to check. The zero value is ready.
type Options struct {
	Workers  int            // benches and grid points computed at once; 0: as many as there are processors
	Benches  []string       // only these; none: all
	Plots    bool           // compute what the benches plot, too
	FailFast bool           // start nothing more after the first expectation that does not hold
	Logger   *slog.Logger   // nil: silent
	Progress func(Progress) // called now and then, from one goroutine at a time; may be nil
}

// Progress says how far a check has come.
type Progress struct {
	File, Bench string  // of the task the news is of
	Time, Until float64 // s, of its transient; 0 without one
	Done, Total int     // tasks: points of all benches' grids
}

// task is one bench at one point of its grid.
type task struct {
	job, bench int
	index      int // of the point
	point      []float64
	result     outcome
}

// outcome is what came of a task.
type outcome struct {
	done     bool
	err      error // the bench could not be solved here
	verdicts []verdict
	plots    []PlotResult
	elapsed  time.Duration
}

// Check computes every expectation of every bench, at every point of its grid. What a cancelled
// context leaves undone is reported as skipped. The report does not depend on the number of workers.
func Check(ctx context.Context, jobs []Job, o Options) *Report {
	c := &checker{jobs: jobs, options: o}
	c.plan()
	c.run(ctx)
	return c.report()
}

// checker runs the tasks of a check.
type checker struct {
	jobs    []Job
	options Options
	tasks   []*task

	mu     sync.Mutex // guards done, the calls of Progress and halted
	done   int
	halted bool
}

// plan lists the tasks in the order of the report.
func (c *checker) plan() {
	for j := range c.jobs {
		if c.jobs[j].Design == nil {
			continue
		}
		for b, bench := range c.jobs[j].Design.Benches {
			if !c.wanted(bench) {
				continue
			}
			for i, point := range grid(bench.Vary) {
				c.tasks = append(c.tasks, &task{job: j, bench: b, index: i, point: point})
			}
		}
	}
}

func (c *checker) wanted(b *netlist.Bench) bool {
	return len(c.options.Benches) == 0 || slices.Contains(c.options.Benches, b.Name)
}

// grid returns every combination of the axes' values, the last axis running fastest; one empty point without axes.
func grid(axes []netlist.Vary) [][]float64 {
	points := [][]float64{{}}
	for _, axis := range axes {
		var next [][]float64
		for _, p := range points {
			for _, v := range axis.Values {
				next = append(next, append(slices.Clone(p), v))
			}
		}
		points = next
	}
	return points
}

// run works through the tasks.
func (c *checker) run(ctx context.Context) {
	workers := c.options.Workers
	if workers <= 0 {
		workers = runtime.GOMAXPROCS(0)
	}
	queue := make(chan *task)
	var wait sync.WaitGroup
	for range min(workers, len(c.tasks)) {
		wait.Go(func() {
			for t := range queue {
				c.compute(ctx, t)
			}
		})
	}
	for _, t := range c.tasks {
		if ctx.Err() != nil || c.isHalted() {
			break
		}
		queue <- t
	}
	close(queue)
	wait.Wait()
}

func (c *checker) isHalted() bool {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.halted
}

// compute runs one task and notes its outcome.
func (c *checker) compute(ctx context.Context, t *task) {
	bench := c.jobs[t.job].Design.Benches[t.bench]
	start := time.Now()
	out := outcome{}
	out.verdicts, out.plots, out.err = c.solve(ctx, t, bench)
	out.elapsed = time.Since(start)
	if out.err != nil && errors.Is(out.err, ctx.Err()) && ctx.Err() != nil {
		return
	}
	out.done = true
	t.result = out
	c.mu.Lock()
	defer c.mu.Unlock()
	c.done++
	if c.options.FailFast && (out.err != nil || slices.ContainsFunc(out.verdicts, func(v verdict) bool { return v.status != Pass })) {
		c.halted = true
	}
	c.tell(Progress{File: c.jobs[t.job].File, Bench: bench.Name})
}

// tell reports progress; c.mu is held.
func (c *checker) tell(p Progress) {
	if c.options.Progress != nil {
		p.Done, p.Total = c.done, len(c.tasks)
		c.options.Progress(p)
	}
}

// solve computes all expectations of a bench at one point.
func (c *checker) solve(ctx context.Context, t *task, bench *netlist.Bench) ([]verdict, []PlotResult, error) {
	setup, err := bench.Setup(t.point)
	if err != nil {
		return nil, nil, err
	}
	e, err := newEvaluation(ctx, setup, c.options.Logger)
	if err != nil {
		return nil, nil, err
	}
	e.progress = c.watch(c.jobs[t.job].File, bench.Name)
	if setup.Run != nil {
		if err := e.run(c.kept(setup), expectedQuantities(setup)); err != nil {
			return nil, nil, err
		}
	} else if _, err := e.quiescent(); err != nil {
		return nil, nil, err
	}
	verdicts := make([]verdict, len(setup.Expected))
	for i := range setup.Expected {
		if err := ctx.Err(); err != nil {
			return nil, nil, err
		}
		verdicts[i] = e.verdict(&setup.Expected[i])
	}
	var plots []PlotResult
	if c.options.Plots {
		plots, err = e.plots(coordinates(bench.Vary, t.point))
	}
	return verdicts, plots, err
}

// kept lists what is asked for as it is over time.
func (c *checker) kept(setup *netlist.Setup) []netlist.Quantity {
	var qs []netlist.Quantity
	if c.options.Plots {
		for _, p := range setup.Plots {
			qs = append(qs, p.Quantities...)
		}
	}
	return qs
}

// expectedQuantities lists what the expectations compare.
func expectedQuantities(setup *netlist.Setup) []netlist.Quantity {
	var qs []netlist.Quantity
	for _, x := range setup.Expected {
		qs = append(qs, x.Quantity)
	}
	return qs
}

// progressPeriod is the least time between two calls of Progress from one transient.
const progressPeriod = 100 * time.Millisecond

// watch returns a function that reports the progress of one transient.
func (c *checker) watch(file, bench string) func(time, until float64) {
	if c.options.Progress == nil {
		return nil
	}
	last := time.Now()
	return func(t, until float64) {
		if time.Since(last) < progressPeriod {
			return
		}
		last = time.Now()
		c.mu.Lock()
		defer c.mu.Unlock()
		c.tell(Progress{File: file, Bench: bench, Time: t, Until: until})
	}
}

// coordinates names the values of a grid point.
func coordinates(axes []netlist.Vary, point []float64) []Coordinate {
	var at []Coordinate
	for i, v := range point {
		at = append(at, Coordinate{Name: axes[i].Target, Value: v, Unit: axes[i].Unit})
	}
	return at
}

// report joins the tasks' outcomes.
func (c *checker) report() *Report {
	r := &Report{}
	next := 0
	for j, job := range c.jobs {
		f := FileResult{File: job.File, Err: job.Err}
		if d := job.Design; d != nil {
			f.Design, f.Title, f.Cautions, f.Warnings = d.Name, d.Title, d.Cautions, d.Warnings
			for b, bench := range d.Benches {
				first := next
				for next < len(c.tasks) && c.tasks[next].job == j && c.tasks[next].bench == b {
					next++
				}
				if first < next {
					f.Benches = append(f.Benches, joinBench(bench, c.tasks[first:next]))
				}
			}
		}
		r.Files = append(r.Files, f)
	}
	r.count()
	return r
}

// joinBench makes a bench's result of its points.
func joinBench(bench *netlist.Bench, points []*task) BenchResult {
	b := BenchResult{Name: bench.Name, Title: bench.Title, Line: bench.Span.Start.Line, Points: len(points)}
	skipped := false
	for _, t := range points {
		b.Elapsed += t.result.elapsed
		skipped = skipped || !t.result.done
		if t.result.err != nil && b.Err == nil {
			b.Err = t.result.err
		}
		b.Plots = append(b.Plots, t.result.plots...)
	}
	for i, x := range bench.Expectations {
		b.Expectations = append(b.Expectations, joinExpectation(&x, i, bench, points))
	}
	b.Status = benchStatus(&b, skipped)
	return b
}

// benchStatus is the worst of the bench's expectations.
func benchStatus(b *BenchResult, skipped bool) Status {
	status := Pass
	if skipped {
		status = Skipped
	}
	for _, x := range b.Expectations {
		switch {
		case x.Status == Error || b.Err != nil:
			return Error
		case x.Status == Fail:
			status = Fail
		}
	}
	if b.Err != nil {
		return Error
	}
	return status
}

// joinExpectation keeps the worst point of an expectation.
func joinExpectation(x *netlist.Expectation, i int, bench *netlist.Bench, points []*task) ExpectationResult {
	worst := verdict{status: Skipped}
	at := -1
	for k, t := range points {
		v := verdict{status: Error, err: t.result.err}
		switch {
		case !t.result.done:
			continue
		case t.result.err == nil:
			v = t.result.verdicts[i]
		}
		if at < 0 || v.worse(&worst) {
			worst, at = v, k
		}
	}
	r := ExpectationResult{
		Line: x.Span.Start.Line, Column: x.Span.Start.Column, Label: x.Label, Text: x.Text,
		Status: worst.status, Err: worst.err, Value: worst.value, Low: worst.low, High: worst.high, Margin: worst.margin, Word: worst.word,
		Unit: x.Unit, Ratio: x.Ratio, Want: x.Word,
	}
	if at >= 0 {
		r.At = append(coordinates(bench.Vary, points[at].point), worst.at...)
	}
	return r
}

// count fills in the totals.
func (r *Report) count() {
	for _, f := range r.Files {
		for _, b := range f.Benches {
			for _, x := range b.Expectations {
				switch x.Status {
				case Pass:
					r.Totals.Pass++
				case Fail:
					r.Totals.Fail++
				case Error:
					r.Totals.Error++
				default:
					r.Totals.Skipped++
					r.Incomplete = true
				}
			}
		}
	}
}
