package cql2

import (
	"fmt"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"
)

// Limits of a filter.
const (
	maxBytes = 64 << 10
	maxDepth = 100
)

// SyntaxError says where a filter cannot be read.
type SyntaxError struct {
	At   int // character, from 1
	What string
}

func (e *SyntaxError) Error() string { return fmt.Sprintf("at character %d: %s", e.At, e.What) }

type tokenKind uint8

const (
	tokEnd tokenKind = iota
	tokWord
	tokQuoted // "name"
	tokText
	tokNumber
	tokMark // ( ) , = <> < <= > >=
)

type token struct {
	kind tokenKind
	text string // word and mark as written, text and quoted name without quotes
	num  float64
	at   int // byte
}

func (t token) String() string {
	switch t.kind {
	case tokEnd:
		return "the end"
	case tokText:
		return quote(t.text, '\'')
	case tokQuoted:
		return quote(t.text, '"')
	}
	return t.text
}

// is reports whether the token is a word of the language or a mark.
func (t token) is(s string) bool {
	return (t.kind == tokWord || t.kind == tokMark) && strings.EqualFold(t.text, s)
}

func quote(s string, q byte) string {
	return string(q) + strings.ReplaceAll(s, string(q), string([]byte{q, q})) + string(q)
}

type lexer struct {
	s string
	i int
}

func (l *lexer) fail(at int, format string, a ...any) error {
	return &SyntaxError{At: utf8.RuneCountInString(l.s[:min(at, len(l.s))]) + 1, What: fmt.Sprintf(format, a...)}
}

func isDigit(c byte) bool { return c >= '0' && c <= '9' }

func wordStart(r rune) bool { return r == '_' || r == ':' || unicode.IsLetter(r) }

func wordPart(r rune) bool { return wordStart(r) || r == '.' || unicode.IsDigit(r) }

// next returns the next token.
func (l *lexer) next() (token, error) {
	for l.i < len(l.s) && strings.IndexByte(" \t\r\n", l.s[l.i]) >= 0 {
		l.i++
	}
	at := l.i
	if at == len(l.s) {
		return token{at: at}, nil
	}
	c := l.s[at]
	switch {
	case c == '\'' || c == '"':
		text, err := l.quoted(c)
		kind := tokText
		if c == '"' {
			kind = tokQuoted
		}
		return token{kind: kind, text: text, at: at}, err
	case isDigit(c) || strings.IndexByte("+-.", c) >= 0:
		return l.number()
	case c == '(' || c == ')' || c == ',' || c == '=':
		l.i++
	case c == '<' || c == '>':
		l.i++
		if l.i < len(l.s) && (l.s[l.i] == '=' || c == '<' && l.s[l.i] == '>') {
			l.i++
		}
	default:
		r, n := utf8.DecodeRuneInString(l.s[at:])
		if !wordStart(r) || r == utf8.RuneError {
			return token{}, l.fail(at, "%q is no part of a filter; a text stands in 'quotes', a column name with odd letters in \"double quotes\"", r)
		}
		for l.i += n; l.i < len(l.s); l.i += n {
			if r, n = utf8.DecodeRuneInString(l.s[l.i:]); !wordPart(r) || r == utf8.RuneError {
				break
			}
		}
		return token{kind: tokWord, text: l.s[at:l.i], at: at}, nil
	}
	return token{kind: tokMark, text: l.s[at:l.i], at: at}, nil
}

// quoted reads up to the closing quote; a doubled one stands for itself.
func (l *lexer) quoted(q byte) (string, error) {
	at := l.i
	var b strings.Builder
	for l.i++; l.i < len(l.s); l.i++ {
		c := l.s[l.i]
		if c == q {
			if l.i+1 >= len(l.s) || l.s[l.i+1] != q {
				l.i++
				if !utf8.ValidString(b.String()) {
					return "", l.fail(at, "the quoted text is not UTF-8")
				}
				return b.String(), nil
			}
			l.i++
		}
		b.WriteByte(c)
	}
	return "", l.fail(at, "the quote is not closed")
}

func (l *lexer) number() (token, error) {
	at := l.i
	if c := l.s[at]; c == '+' || c == '-' {
		l.i++
	}
	for l.i < len(l.s) {
		c := l.s[l.i]
		sign := (c == '+' || c == '-') && strings.IndexByte("eE", l.s[l.i-1]) >= 0
		if !isDigit(c) && c != '.' && c != 'e' && c != 'E' && !sign {
			break
		}
		l.i++
	}
	v, err := strconv.ParseFloat(l.s[at:l.i], 64)
	if err != nil {
		return token{}, l.fail(at, "%q is no number", l.s[at:l.i])
	}
	return token{kind: tokNumber, text: l.s[at:l.i], num: v, at: at}, nil
}
