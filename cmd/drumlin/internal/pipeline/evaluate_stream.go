package pipeline

import (
	"context"
	"errors"
	"fmt"
	"io"
	"math"
	"slices"

	"drumlin/io/arrowfile"
	"drumlin/io/csvfile"
	"drumlin/io/events"
	"drumlin/io/parquetfile"
	"drumlin/mv"
)

// chunkRows is how many query rows are evaluated and written together.
const chunkRows = 1 << 16

// latticePairs is the number of pairs from which derivatives go to a lattice.
const latticePairs = 3e7

// prepare chooses the plan and builds the evaluators.
func (e *evaluation) prepare(queries int) error {
	method, err := mv.ParseMethod(e.s.Plan)
	if err != nil {
		return err
	}
	plan, err := mv.NewPlan(e.sample, e.kernel, e.h, mv.PlanOptions{Queries: queries, Rtol: e.s.Rtol, Atol: e.s.Atol, Workers: e.s.Workers, Force: method})
	if err != nil {
		return err
	}
	e.out.Plan = EvaluationPlan{Method: plan.Method.String(), Forced: plan.Forced, Rtol: plan.Rtol, Atol: plan.Atol, Text: plan.String()}
	if e.dens, err = plan.Evaluator(e.sample, e.kernel, e.h); err != nil {
		return err
	}
	if e.hessian, err = e.derivative(mv.Gaussian, e.g, queries); err != nil || !e.s.Gradient {
		return err
	}
	if e.kernel == mv.Uniform {
		return &events.Fault{Kind: events.ErrUnsupported, What: "the uniform kernel has no gradient", Remedy: "choose another kernel or leave --gradient out"}
	}
	e.gradient, err = e.derivative(e.kernel, e.h, queries)
	return err
}

// derivative takes a lattice where that is cheaper than the direct sum and one
// fits the memory.
func (e *evaluation) derivative(k mv.Kernel, h mv.BandwidthMatrix, queries int) (derivatives, error) {
	n, m := float64(e.sample.Len()), float64(queries)
	if m == 0 {
		m = n
	}
	if k == mv.Gaussian && e.s.Plan != "direct" && e.sample.Dim() <= lattices && n*m > latticePairs {
		rtol := e.s.Rtol
		if rtol == 0 {
			rtol = 1e-6
		}
		l, err := mv.NewLatticeEvaluator(e.sample, k, h, mv.LatticeOptions{Rtol: rtol, Workers: e.s.Workers, Alone: true})
		if err == nil || !errors.Is(err, mv.ErrTooLarge) {
			return l, err
		}
	}
	return mv.NewDirect(e.sample, k, h, mv.EvalOptions{Workers: e.s.Workers})
}

// stream reads the queries piece by piece, evaluates and writes them.
func (e *evaluation) stream(ctx context.Context, queries []events.Source, names []string, t table) error {
	d := len(e.s.Columns)
	at := make([]int, d)
	for k, c := range e.s.Columns {
		at[k] = slices.Index(names, c)
	}
	chunk := make([][]float64, len(names))
	flush := func() error {
		if len(chunk[0]) == 0 {
			return nil
		}
		out, err := e.at(ctx, chunk, at)
		if err != nil {
			return err
		}
		if err := t.WriteBatch(append(slices.Clone(chunk), out...)); err != nil {
			return err
		}
		for k := range chunk {
			chunk[k] = chunk[k][:0]
		}
		return nil
	}
	for _, q := range queries {
		for p := range q.Parts() {
			err := q.Read(ctx, p, names, func(b events.Batch) error {
				e.report.Rows(int64(b.Len()))
				for k := range chunk {
					chunk[k] = append(chunk[k], b.Columns[k]...)
				}
				if len(chunk[0]) >= chunkRows {
					return flush()
				}
				return nil
			})
			if err != nil {
				return err
			}
		}
	}
	return flush()
}

// at returns the result's columns for a chunk of query rows.
func (e *evaluation) at(ctx context.Context, chunk [][]float64, at []int) ([][]float64, error) {
	d, rows := len(at), len(chunk[0])
	out := make([][]float64, len(e.added()))
	for k := range out {
		out[k] = make([]float64, rows)
		for i := range out[k] {
			out[k][i] = events.Null
		}
	}
	points := make([][]float64, d)
	var which []int
next:
	for i := range rows {
		for _, k := range at {
			if v := chunk[k][i]; math.IsNaN(v) || math.IsInf(v, 0) {
				continue next
			}
		}
		which = append(which, i)
		for k := range points {
			points[k] = append(points[k], chunk[at[k]][i])
		}
	}
	m := len(which)
	e.out.Queries += int64(rows)
	e.out.Unusable += int64(rows - m)
	if m == 0 {
		return out, nil
	}
	f := make([]float64, m)
	if err := e.dens.Density(ctx, f, points); err != nil {
		return nil, err
	}
	second := mv.MultiIndices(d, 2)
	hess := columnsOf(len(second), m)
	if err := e.hessian.Derivatives(ctx, hess, points, second); err != nil {
		return nil, err
	}
	var grad [][]float64
	if e.s.Gradient {
		grad = columnsOf(d, m)
		if err := e.gradient.Derivatives(ctx, grad, points, mv.MultiIndices(d, 1)); err != nil {
			return nil, err
		}
	}
	row := make([]float64, len(second))
	n := e.sample.EffectiveN()
	for j, i := range which {
		for k := range row {
			row[k] = hess[k][j]
		}
		p, err := mv.NewPointwise(e.kernel, e.h, f[j], row, n)
		if err != nil {
			return nil, err
		}
		out[0][i], out[1][i], out[2][i] = p.Density, p.StandardError, p.Bias
		for k := range grad {
			out[3+k][i] = grad[k][j]
		}
	}
	return out, nil
}

func columnsOf(k, m int) [][]float64 {
	out := make([][]float64, k)
	for i := range out {
		out[i] = make([]float64, m)
	}
	return out
}

// table is a result file being written.
type table interface {
	WriteBatch(columns [][]float64) error
	Close() error
}

// newTable starts a result in the format; meta is kept in it where the format
// has a place for it.
func newTable(w io.Writer, format string, names []string, meta string) (table, error) {
	kept := map[string]string{"drumlin": meta}
	switch format {
	case "parquet":
		cols := make([]parquetfile.Column, len(names))
		for i, n := range names {
			cols[i] = parquetfile.Column{Name: n}
		}
		p, err := parquetfile.NewWriter(w, cols, parquetfile.WriteOptions{Metadata: kept})
		return &parquetTable{p, cols}, err
	case "arrow":
		return arrowfile.NewWriter(w, names, arrowfile.WriteOptions{Metadata: kept})
	case "csv":
		return csvfile.NewWriter(w, names)
	}
	return nil, fmt.Errorf("no writer for %q", format)
}

// parquetTable writes a row group a batch; its columns hold no nulls, so an
// absent value is NaN.
type parquetTable struct {
	*parquetfile.Writer
	cols []parquetfile.Column
}

func (p *parquetTable) WriteBatch(columns [][]float64) error {
	for i, c := range columns {
		p.cols[i].Floats = c
	}
	return p.WriteRowGroup(p.cols)
}
