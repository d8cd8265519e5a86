package events

import (
	"encoding/json"
	"fmt"
	"strconv"
)

// Reason says why a row was set aside. The order is the order in which a row
// is judged: the first reason that holds is the one counted.
type Reason uint8

// The reasons, in order of judgement.
const (
	NullCoordinate    Reason = iota // a coordinate is absent
	NotANumberText                  // a cell of text that is no number
	NotANumber                      // a coordinate is NaN
	Infinite                        // a coordinate is infinite
	LongitudeRange                  // longitude outside [-180, 360] degrees
	LatitudeRange                   // latitude outside [-90, 90] degrees
	NullIsland                      // longitude and latitude both exactly 0: a failed geocoding, not a place
	BeyondPlane                     // planar |x| or |y| above 1e8 m
	WeightNull                      // the weight is absent
	WeightNotFinite                 // the weight is NaN or infinite
	WeightNegative                  // the weight is below zero
	WeightZero                      // the weight is zero
	OutsideProjection               // no place on the working plane
	OutsideStudyArea                // not within the study area
	reasons                         // how many there are
)

var reasonNames = [reasons]string{
	"null", "not-a-value", "not-a-number", "infinite",
	"longitude-out-of-range", "latitude-out-of-range", "null-island", "beyond-plane",
	"weight-null", "weight-not-finite", "weight-negative", "zero-weight",
	"outside-projection", "outside-study-area",
}

// Reasons lists every reason in order of judgement.
func Reasons() []Reason {
	all := make([]Reason, reasons)
	for i := range all {
		all[i] = Reason(i)
	}
	return all
}

// String returns the word used in records, such as "latitude-out-of-range".
func (r Reason) String() string {
	if r < reasons {
		return reasonNames[r]
	}
	return "reason-" + strconv.Itoa(int(r))
}

// Account says what became of the rows read. The zero value is an empty
// account. Read == Used + SetAsideTotal() holds after every method. It is a
// plain value: copies are independent; it is not safe for sharing.
type Account struct {
	Read     int64          // rows read
	Used     int64          // rows kept
	SetAside [reasons]int64 // rows set aside, by Reason
}

// Add merges another account into a; the order of merging does not matter.
func (a *Account) Add(b Account) {
	a.Read += b.Read
	a.Used += b.Used
	for i, n := range b.SetAside {
		a.SetAside[i] += n
	}
}

// Withdraw moves n rows that were counted as used to a reason: for stages that
// judge rows after the screen. It panics when n is negative or above Used.
func (a *Account) Withdraw(r Reason, n int64) {
	if n < 0 || n > a.Used {
		panic("events: withdrawing rows that are not in use")
	}
	a.Used -= n
	a.SetAside[r] += n
}

// SetAsideTotal returns the rows set aside for any reason.
func (a Account) SetAsideTotal() int64 {
	var t int64
	for _, n := range a.SetAside {
		t += n
	}
	return t
}

// Balanced reports whether every row read is used or set aside.
func (a Account) Balanced() bool { return a.Read == a.Used+a.SetAsideTotal() }

// MarshalJSON writes {"read":…,"used":…,"set_aside":{…}} with the reasons in
// order of judgement; reasons without rows are left out.
func (a Account) MarshalJSON() ([]byte, error) {
	b := fmt.Appendf(nil, `{"read":%d,"used":%d,"set_aside":{`, a.Read, a.Used)
	first := true
	for i, n := range a.SetAside {
		if n == 0 {
			continue
		}
		if !first {
			b = append(b, ',')
		}
		first = false
		b = fmt.Appendf(b, `%q:%d`, reasonNames[i], n)
	}
	return append(b, '}', '}'), nil
}

// UnmarshalJSON reads what MarshalJSON writes; an unknown reason or an account
// that does not balance is an error.
func (a *Account) UnmarshalJSON(data []byte) error {
	var raw struct {
		Read     int64            `json:"read"`
		Used     int64            `json:"used"`
		SetAside map[string]int64 `json:"set_aside"`
	}
	if err := json.Unmarshal(data, &raw); err != nil {
		return err
	}
	out := Account{Read: raw.Read, Used: raw.Used}
	known := 0
	for i, name := range reasonNames {
		if n, ok := raw.SetAside[name]; ok {
			out.SetAside[i] = n
			known++
		}
	}
	if known != len(raw.SetAside) {
		return fmt.Errorf("row account: a reason this version does not know")
	}
	if !out.Balanced() {
		return fmt.Errorf("row account: %d read is not %d used and %d set aside", out.Read, out.Used, out.SetAsideTotal())
	}
	*a = out
	return nil
}
