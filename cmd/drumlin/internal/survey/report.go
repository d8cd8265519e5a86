package survey

import "drumlin/io/events"

// Report is what a survey found.
type Report struct {
	Type        string       `json:"type"` // "survey"
	Inputs      []Input      `json:"inputs"`
	Rows        int64        `json:"rows"`
	Columns     []Column     `json:"columns"`
	Coordinates *Coordinates `json:"coordinates,omitempty"` // nil where the columns are not known
	Map         Outlook      `json:"map"`
	Findings    []string     `json:"findings"` // in words, the gravest first
}

// Input is one file.
type Input struct {
	Path    string `json:"path"`
	Format  string `json:"format"`
	Bytes   int64  `json:"bytes"` // -1 for a stream
	Rows    int64  `json:"rows"`
	Columns int    `json:"columns"`
	CRS     string `json:"crs,omitempty"` // as the file states it
}

// Column is one column over all files.
type Column struct {
	Name      string   `json:"name"`
	Type      string   `json:"type"`
	Holds     string   `json:"holds"` // "numbers", "text", "times", "times as text", "true or false", "not read"
	Rows      int64    `json:"rows"`
	Nulls     int64    `json:"nulls"`
	NotAValue int64    `json:"not_a_value,omitempty"`
	NaN       int64    `json:"not_a_number,omitempty"`
	Infinite  int64    `json:"infinite,omitempty"`
	Least     *float64 `json:"least,omitempty"`
	Greatest  *float64 `json:"greatest,omitempty"`
	From      string   `json:"from,omitempty"`
	To        string   `json:"to,omitempty"`
	Distinct  int      `json:"distinct,omitempty"` // of text, up to 1,000
	More      bool     `json:"distinct_and_more,omitempty"`
	Note      string   `json:"note,omitempty"`
}

// Coordinates is what is known of the positions that pass filter and screen.
type Coordinates struct {
	X          string     `json:"x"`
	Y          string     `json:"y"`
	CRS        string     `json:"crs,omitempty"` // as map would take it
	CRSGuesses []string   `json:"crs_guesses"`   // what the numbers look like
	Extent     []float64  `json:"extent,omitempty"`
	Middle95   []float64  `json:"middle_95_per_cent,omitempty"` // x and y of least, then of greatest
	Rows       int64      `json:"rows"`
	Distinct   int64      `json:"distinct_positions"`
	Estimated  bool       `json:"estimated"`       // the counts of positions, stacks, decimals and ties
	OneIn      int64      `json:"one_position_in"` // positions held of all; 1: every one
	Repeated   int64      `json:"rows_at_repeated_positions"`
	Stacks     []Stack    `json:"tallest_stacks"`
	NoTaller   int64      `json:"no_stack_taller_than"`
	Decimals   []Decimals `json:"decimals"`
	TiedPairs  float64    `json:"tied_pairs"`
	TieRatio   float64    `json:"tied_pairs_per_event"`
	TieLimit   float64    `json:"tied_pairs_limit"` // above it least-squares cross-validation collapses
	NullIsland int64      `json:"null_island_rows"`
	Sentinels  []Sentinel `json:"sentinels"`
	Swapped    int64      `json:"rows_that_look_swapped"`
	Outliers   int64      `json:"outliers"` // beyond the middle 95 % widened by twice its width on every side
}

// Stack is a position with several rows; where it is stands there only when
// asked for.
type Stack struct {
	Rows int64    `json:"rows"`
	X    *float64 `json:"x,omitempty"`
	Y    *float64 `json:"y,omitempty"`
}

// Decimals counts rows by the digits after the point of their finer coordinate.
type Decimals struct {
	Digits int   `json:"digits"`
	Rows   int64 `json:"rows"`
}

// Sentinel counts rows with a number that often stands for "unknown".
type Sentinel struct {
	Value float64 `json:"value"`
	Rows  int64   `json:"rows"`
}

// Outlook is what map would do with the extract.
type Outlook struct {
	Refusal       string          `json:"refusal,omitempty"` // why it would stop, "" if it would not
	Account       *events.Account `json:"rows,omitempty"`
	OutsideExtent int64           `json:"outside_extent"`
	Plane         string          `json:"plane,omitempty"`
}
