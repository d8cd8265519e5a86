package pipeline

import (
	"context"
	"encoding/json"
	"fmt"
	"io"
	"math"

	"drumlin/cmd/drumlin/internal/config"
	"drumlin/cmd/drumlin/internal/progress"
	"drumlin/io/bundle"
	"drumlin/io/events"
	"drumlin/io/record"
	"drumlin/mv"
)

// Evaluation is what a run of Evaluate did: its record, kept in the metadata
// of a Parquet or Arrow result under the key "drumlin" and printed by --json.
type Evaluation struct {
	Program   record.Program      `json:"program"`
	Inputs    []EvaluationInput   `json:"inputs"`
	Columns   []string            `json:"columns"`
	Weight    string              `json:"weight,omitempty"`
	Rows      events.Account      `json:"rows"`
	Effective float64             `json:"effective_events"`
	Bandwidth EvaluationBandwidth `json:"bandwidth"`
	Plan      EvaluationPlan      `json:"plan"`
	Query     string              `json:"query"`
	Warnings  []string            `json:"warnings,omitempty"`

	// What is known only when the result is written.
	Queries  int64 `json:"queries,omitempty"`
	Unusable int64 `json:"queries_without_place,omitempty"`
}

// EvaluationInput is one file of events.
type EvaluationInput struct {
	Path   string `json:"path"`
	Format string `json:"format"`
	Rows   int64  `json:"rows"`
}

// EvaluationBandwidth is H, row-major, in squared units of the columns.
type EvaluationBandwidth struct {
	Method    string    `json:"method"`
	Shape     string    `json:"shape"`
	Kernel    string    `json:"kernel"`
	Matrix    []float64 `json:"matrix"`
	MatrixHex []string  `json:"matrix_hex"`
	Pilot     []float64 `json:"bias_pilot"`
	Notes     []string  `json:"notes,omitempty"`
}

// EvaluationPlan says how the density was evaluated.
type EvaluationPlan struct {
	Method string  `json:"method"`
	Forced bool    `json:"forced"`
	Rtol   float64 `json:"rtol"`
	Atol   float64 `json:"atol"`
	Text   string  `json:"text"` // reason and cost
}

// Describe says in words what was done.
func (e *Evaluation) Describe(w io.Writer) {
	fmt.Fprintf(w, "%s events over %d columns; %s rows set aside.\n", progress.Count(e.Rows.Used), len(e.Columns), progress.Count(e.Rows.SetAsideTotal()))
	fmt.Fprintf(w, "Bandwidth: %s, %s, %s kernel: H = %v\n", e.Bandwidth.Method, e.Bandwidth.Shape, e.Bandwidth.Kernel, e.Bandwidth.Matrix)
	fmt.Fprintf(w, "Plan: %s\n", e.Plan.Text)
	fmt.Fprintf(w, "%s query rows", progress.Count(e.Queries))
	if e.Unusable > 0 {
		fmt.Fprintf(w, ", %s of them without a place", progress.Count(e.Unusable))
	}
	fmt.Fprintln(w, ".")
}

// evaluation carries one run through its stages.
type evaluation struct {
	s      *config.EvaluateSettings
	report *progress.Reporter
	out    *Evaluation
	sample *mv.Sample
	kernel mv.Kernel
	h, g   mv.BandwidthMatrix
	dens   mv.Evaluator
	// Second derivatives with pilot g and, for the gradient, first ones with h.
	hessian, gradient derivatives
}

// derivatives is what the direct and the lattice evaluator have in common.
type derivatives interface {
	Derivatives(ctx context.Context, dst [][]float64, queries [][]float64, ks [][]int) error
}

// Evaluate writes density and errors at the query's rows.
func Evaluate(ctx context.Context, s *config.EvaluateSettings, report *progress.Reporter) (*Evaluation, error) {
	e := &evaluation{s: s, report: report, out: &Evaluation{Program: program(), Columns: s.Columns, Weight: s.Weight, Query: s.At}}
	queries, err := openAll([]string{s.At})
	if err != nil {
		return nil, err
	}
	defer closeAll(queries)
	names, err := e.resultNames(queries)
	if err != nil {
		return nil, err
	}
	if err := e.readEvents(ctx); err != nil {
		return nil, err
	}
	report.Stage("bandwidth")
	if err := e.chooseBandwidth(); err != nil {
		return nil, err
	}
	rows := 0
	for _, q := range queries {
		for p := range q.Parts() {
			rows += int(max(0, q.PartRows(p)))
		}
	}
	report.Stage("preparing")
	if err := e.prepare(rows); err != nil {
		return nil, err
	}
	report.Stage("evaluating")
	err = bundle.WriteFile(ctx, s.Out, s.Replace, func(w io.Writer) error {
		meta, err := json.Marshal(e.out)
		if err != nil {
			return err
		}
		t, err := newTable(w, s.OutFormat(), append(append([]string(nil), names...), e.added()...), string(meta))
		if err != nil {
			return err
		}
		if err := e.stream(ctx, queries, names, t); err != nil {
			return err
		}
		return t.Close()
	})
	if err != nil {
		return nil, err
	}
	for _, text := range append(e.out.Warnings, e.out.Bandwidth.Notes...) {
		report.Warn(text)
	}
	return e.out, nil
}

// added lists the columns that come after the query's.
func (e *evaluation) added() []string {
	names := []string{"density", "standard_error", "smoothing_bias"}
	if e.s.Gradient {
		for _, c := range e.s.Columns {
			names = append(names, "gradient_"+c)
		}
	}
	return names
}

// resultNames returns the query's columns that are kept: the numeric ones.
func (e *evaluation) resultNames(queries []events.Source) ([]string, error) {
	var names []string
	left := 0
	for _, f := range queries[0].Fields() {
		if !f.Numeric {
			left++
			continue
		}
		names = append(names, f.Name)
		for _, a := range e.added() {
			if f.Name == a {
				return nil, &events.Fault{Kind: events.ErrSetting, File: queries[0].Info().Name, What: fmt.Sprintf("the query has a column %q already", a), Remedy: "rename it"}
			}
		}
	}
	if left > 0 {
		e.out.Warnings = append(e.out.Warnings, fmt.Sprintf("%d columns of the query hold no numbers and are left out", left))
	}
	for _, q := range queries {
		for _, c := range e.s.Columns {
			if err := events.CheckNumeric(c, q.Fields()); err != nil {
				return nil, inFile(err, q)
			}
		}
	}
	return names, nil
}

// readEvents brings the events into memory, in the order of names and rows.
func (e *evaluation) readEvents(ctx context.Context) error {
	sources, err := openAll(e.s.Inputs)
	if err != nil {
		return err
	}
	defer closeAll(sources)
	e.report.Stage("reading")
	d := len(e.s.Columns)
	columns := append([]string(nil), e.s.Columns...)
	if e.s.Weight != "" {
		columns = append(columns, e.s.Weight)
	}
	cols := make([][]float64, len(columns))
	account := &e.out.Rows
	for _, src := range sources {
		for _, c := range columns {
			if err := events.CheckNumeric(c, src.Fields()); err != nil {
				return inFile(err, src)
			}
		}
		before := account.Read
		for p := range src.Parts() {
			err := src.Read(ctx, p, columns, func(b events.Batch) error {
				e.report.Rows(int64(b.Len()))
				for i := range b.Len() {
					account.Read++
					if reason, bad := judgeRow(b, i, d); bad {
						account.SetAside[reason]++
						continue
					}
					account.Used++
					for k := range cols {
						cols[k] = append(cols[k], b.Columns[k][i])
					}
				}
				return nil
			})
			if err != nil {
				return err
			}
		}
		info := src.Info()
		e.out.Inputs = append(e.out.Inputs, EvaluationInput{Path: info.Name, Format: info.Format, Rows: account.Read - before})
	}
	if account.Used == 0 {
		return fmt.Errorf("%w: %s", ErrNoEvents, reasonsText(*account))
	}
	var w []float64
	if e.s.Weight != "" {
		w = cols[d]
	}
	if e.sample, err = mv.NewSample(cols[:d], w); err != nil {
		return err
	}
	e.out.Effective = e.sample.EffectiveN()
	return nil
}

// judgeRow names the first reason against a row.
func judgeRow(b events.Batch, i, d int) (events.Reason, bool) {
	var text, nan, inf bool
	for k, c := range b.Columns {
		v := c[i]
		switch {
		case events.IsNull(v) && k < d:
			return events.NullCoordinate, true
		case events.IsNotAValue(v):
			text = true
		case k < d && math.IsNaN(v):
			nan = true
		case k < d && math.IsInf(v, 0):
			inf = true
		}
	}
	switch {
	case text:
		return events.NotANumberText, true
	case nan:
		return events.NotANumber, true
	case inf:
		return events.Infinite, true
	case len(b.Columns) == d:
		return 0, false
	}
	switch w := b.Columns[d][i]; {
	case events.IsNull(w):
		return events.WeightNull, true
	case math.IsNaN(w) || math.IsInf(w, 0):
		return events.WeightNotFinite, true
	case w < 0:
		return events.WeightNegative, true
	case w == 0:
		return events.WeightZero, true
	}
	return 0, false
}
