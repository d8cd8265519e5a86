// Package events holds what every reader of events shares: the Source
// contract, faults, the account of rows set aside, and the choice of columns.
//
// Notation: a batch is a set of equally long float64 columns; x is longitude or
// easting, y is latitude or northing, w is a weight. Null and NotAValue are two
// NaNs with payloads of their own, so that an absent cell, a cell that is no
// number and a NaN in the data stay three different things.
//
// Units: degrees where the coordinates are geographic, metres where they are
// planar; weights are pure numbers.
//
// Cost: Screen.Apply is O(rows) time, about two nanoseconds a row when every
// row is good, and allocates nothing. Sniff and Resolve do not depend on the
// number of rows.
package events
