package cql2

import (
	"strconv"
	"strings"
)

// Filter is a filter that has been read. It is immutable and safe for sharing.
type Filter struct {
	root    expr
	columns []string
	text    string
}

// expr is a part of a filter that is true, false or unknown of a row.
type expr interface{ write(b *strings.Builder) }

type (
	truth   bool
	negated struct{ of expr }
	joined  struct {
		or   bool
		args []expr
	}
	compared struct {
		op          string
		left, right operand
	}
	listed struct {
		of   operand
		list []operand
	}
	liked struct {
		of      operand
		pattern string
	}
	absent struct{ of operand }
)

type operandKind uint8

const (
	isColumn operandKind = iota
	isNumber
	isText
	isTruth
	isTime // DATE and TIMESTAMP
)

// operand is a column or a value.
type operand struct {
	kind operandKind
	text string // name, text, or the text of a time
	num  float64
	date bool
	at   int
}

// Parse reads a filter. An error is a *SyntaxError.
func Parse(text string) (*Filter, error) {
	p := &parser{lex: lexer{s: text}}
	if len(text) > maxBytes {
		return nil, p.lex.fail(0, "the filter is longer than %d bytes", maxBytes)
	}
	if err := p.advance(); err != nil {
		return nil, err
	}
	if p.tok.kind == tokEnd {
		return nil, p.lex.fail(0, "the filter is empty")
	}
	root, err := p.or(0)
	if err != nil {
		return nil, err
	}
	if p.tok.kind != tokEnd {
		return nil, p.unexpected("AND, OR or the end")
	}
	return &Filter{root: root, columns: p.columns, text: text}, nil
}

// Columns returns the names of the columns the filter looks at, in the order
// in which they first occur.
func (f *Filter) Columns() []string { return append([]string(nil), f.columns...) }

// String writes the filter in one form: words in capitals, brackets throughout.
func (f *Filter) String() string {
	var b strings.Builder
	f.root.write(&b)
	return b.String()
}

type parser struct {
	lex     lexer
	tok     token
	columns []string
}

func (p *parser) advance() (err error) {
	p.tok, err = p.lex.next()
	return err
}

func (p *parser) unexpected(want string) error {
	return p.lex.fail(p.tok.at, "%s where %s is expected", p.tok, want)
}

// take moves past a word or mark if it is next.
func (p *parser) take(s string) (bool, error) {
	if !p.tok.is(s) {
		return false, nil
	}
	return true, p.advance()
}

func (p *parser) need(s string) error {
	ok, err := p.take(s)
	if !ok && err == nil {
		err = p.unexpected(s)
	}
	return err
}

func (p *parser) or(depth int) (expr, error) {
	return p.chain("OR", depth, func(d int) (expr, error) { return p.chain("AND", d, p.not) })
}

// chain reads one or more parts with the word between them.
func (p *parser) chain(word string, depth int, part func(int) (expr, error)) (expr, error) {
	e, err := part(depth)
	if err != nil || !p.tok.is(word) {
		return e, err
	}
	j := joined{or: word == "OR", args: []expr{e}}
	for {
		more, err := p.take(word)
		if err != nil {
			return nil, err
		}
		if !more {
			return j, nil
		}
		if e, err = part(depth); err != nil {
			return nil, err
		}
		j.args = append(j.args, e)
	}
}

func (p *parser) not(depth int) (expr, error) {
	if depth > maxDepth {
		return nil, p.lex.fail(p.tok.at, "the filter is nested too deeply")
	}
	if neg, err := p.take("NOT"); err != nil {
		return nil, err
	} else if neg {
		e, err := p.not(depth + 1)
		return negated{e}, err
	}
	if open, err := p.take("("); err != nil {
		return nil, err
	} else if open {
		e, err := p.or(depth + 1)
		if err != nil {
			return nil, err
		}
		return e, p.need(")")
	}
	return p.predicate()
}

func (p *parser) predicate() (expr, error) {
	left, err := p.operand()
	if err != nil {
		return nil, err
	}
	for _, op := range []string{"=", "<>", "<", "<=", ">", ">="} {
		if is, err := p.take(op); err != nil {
			return nil, err
		} else if is {
			right, err := p.operand()
			return compared{op, left, right}, err
		}
	}
	if is, err := p.take("IS"); err != nil {
		return nil, err
	} else if is {
		neg, err := p.take("NOT")
		if err == nil {
			err = p.need("NULL")
		}
		return maybe(neg, absent{left}), err
	}
	neg, err := p.take("NOT")
	if err != nil {
		return nil, err
	}
	switch {
	case p.tok.is("BETWEEN"), p.tok.is("IN"), p.tok.is("LIKE"):
		word := strings.ToUpper(p.tok.text)
		if err := p.advance(); err != nil {
			return nil, err
		}
		e, err := map[string]func(operand) (expr, error){"BETWEEN": p.between, "IN": p.in, "LIKE": p.like}[word](left)
		return maybe(neg, e), err
	case left.kind == isTruth && !neg:
		return truth(left.num == 1), nil
	case neg:
		return nil, p.unexpected("BETWEEN, IN or LIKE")
	}
	return nil, p.unexpected("a comparison (=, <>, <, <=, >, >=, BETWEEN, IN, LIKE, IS NULL)")
}

func maybe(neg bool, e expr) expr {
	if neg {
		return negated{e}
	}
	return e
}

func (p *parser) between(of operand) (expr, error) {
	lo, err := p.operand()
	if err != nil {
		return nil, err
	}
	if err := p.need("AND"); err != nil {
		return nil, err
	}
	hi, err := p.operand()
	return joined{args: []expr{compared{">=", of, lo}, compared{"<=", of, hi}}}, err
}

func (p *parser) in(of operand) (expr, error) {
	if err := p.need("("); err != nil {
		return nil, err
	}
	l := listed{of: of}
	for {
		v, err := p.operand()
		if err != nil {
			return nil, err
		}
		if v.kind == isColumn {
			return nil, p.lex.fail(v.at, "a list after IN holds values, not columns such as %s; text stands in 'quotes'", v.text)
		}
		l.list = append(l.list, v)
		if more, err := p.take(","); err != nil {
			return nil, err
		} else if !more {
			return l, p.need(")")
		}
	}
}

func (p *parser) like(of operand) (expr, error) {
	if p.tok.kind != tokText {
		return nil, p.unexpected("a pattern in 'quotes'")
	}
	e := liked{of, p.tok.text}
	return e, p.advance()
}

var reserved = []string{"AND", "OR", "NOT", "IN", "BETWEEN", "LIKE", "IS", "NULL"}

func (p *parser) operand() (operand, error) {
	t := p.tok
	for _, w := range reserved {
		if t.kind == tokWord && t.is(w) {
			return operand{}, p.unexpected("a column or a value")
		}
	}
	o := operand{text: t.text, num: t.num, at: t.at}
	switch t.kind {
	case tokNumber:
		o.kind = isNumber
	case tokText:
		o.kind = isText
	case tokQuoted, tokWord:
		if t.is("TRUE") || t.is("FALSE") {
			o.kind = isTruth
			if t.is("TRUE") {
				o.num = 1
			}
			break
		}
		if err := p.advance(); err != nil {
			return o, err
		}
		if p.tok.is("(") && (t.is("DATE") || t.is("TIMESTAMP")) {
			return p.time(t)
		}
		if p.tok.is("(") {
			return o, p.lex.fail(t.at, "functions such as %s(...) are not read", t.text)
		}
		p.note(t.text)
		return o, nil
	default:
		return o, p.unexpected("a column or a value")
	}
	return o, p.advance()
}

func (p *parser) note(column string) {
	for _, c := range p.columns {
		if c == column {
			return
		}
	}
	p.columns = append(p.columns, column)
}

// time reads DATE('...') or TIMESTAMP('...') from the bracket on.
func (p *parser) time(word token) (operand, error) {
	o := operand{kind: isTime, date: word.is("DATE"), at: word.at}
	if err := p.advance(); err != nil {
		return o, err
	}
	if p.tok.kind != tokText {
		return o, p.unexpected("a time in 'quotes'")
	}
	o.text = p.tok.text
	if o.date && len(o.text) != len("2025-03-01") || !o.date && len(o.text) < len("2025-03-01T12:30") || !isTimeText(o.text) {
		form := "TIMESTAMP('2025-03-01T12:30:00Z')"
		if o.date {
			form = "DATE('2025-03-01')"
		}
		return o, p.lex.fail(p.tok.at, "%s cannot be read; write %s", p.tok, form)
	}
	if err := p.advance(); err != nil {
		return o, err
	}
	return o, p.need(")")
}

func (t truth) write(b *strings.Builder) { b.WriteString(strings.ToUpper(strconv.FormatBool(bool(t)))) }

func (n negated) write(b *strings.Builder) {
	b.WriteString("NOT (")
	n.of.write(b)
	b.WriteByte(')')
}

func (j joined) write(b *strings.Builder) {
	for i, a := range j.args {
		if i > 0 && j.or {
			b.WriteString(" OR ")
		} else if i > 0 {
			b.WriteString(" AND ")
		}
		b.WriteByte('(')
		a.write(b)
		b.WriteByte(')')
	}
}

func (c compared) write(b *strings.Builder) {
	b.WriteString(c.left.String() + " " + c.op + " " + c.right.String())
}

func (l listed) write(b *strings.Builder) {
	b.WriteString(l.of.String() + " IN (")
	for i, v := range l.list {
		if i > 0 {
			b.WriteString(", ")
		}
		b.WriteString(v.String())
	}
	b.WriteByte(')')
}

func (l liked) write(b *strings.Builder) {
	b.WriteString(l.of.String() + " LIKE " + quote(l.pattern, '\''))
}

func (a absent) write(b *strings.Builder) { b.WriteString(a.of.String() + " IS NULL") }

func (o operand) String() string {
	switch o.kind {
	case isNumber:
		return strconv.FormatFloat(o.num, 'g', -1, 64)
	case isText:
		return quote(o.text, '\'')
	case isTruth:
		return strings.ToUpper(strconv.FormatBool(o.num == 1))
	case isTime:
		if o.date {
			return "DATE(" + quote(o.text, '\'') + ")"
		}
		return "TIMESTAMP(" + quote(o.text, '\'') + ")"
	}
	return quote(o.text, '"')
}
