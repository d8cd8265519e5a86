package events_test

import (
	"testing"
	"time"

	"drumlin/io/events"
)

func TestParseTime(t *testing.T) {
	for _, s := range []string{
		"1970-01-01T00:00:00Z", "2024-02-29T23:59:59.123456Z", "1900-03-01T00:00:00Z", "2100-12-31T12:00:00+01:00",
		"0001-01-01T00:00:00Z", "1969-12-31T23:59:59.5-11:30", "2000-02-29T01:02:03Z",
	} {
		want, err := time.Parse(time.RFC3339Nano, s)
		if err != nil {
			t.Fatal(err)
		}
		if got, utc, ok := events.ParseTime(s); !ok || !utc || got != float64(want.UnixMicro()) {
			t.Errorf("%s: %v %v %v, want %v", s, got, utc, ok, want.UnixMicro())
		}
	}
	for s, want := range map[string]float64{
		"1970-01-02": 86400e6, "1970-01-02 00:00": 86400e6, "1970-01-01T01:02": 3720e6, "1970-01-01 00:00:01,5": 1.5e6,
	} {
		if got, utc, ok := events.ParseTime(s); !ok || utc || got != want {
			t.Errorf("%s: %v %v %v", s, got, utc, ok)
		}
	}
	for s, want := range map[string]float64{"1970-01-01T02:00+01": 3600e6, "1970-01-01T02:00:00-0130": 12600e6, "1970-01-01t00:00z": 0} {
		if got, utc, ok := events.ParseTime(s); !ok || !utc || got != want {
			t.Errorf("%s: %v %v %v", s, got, utc, ok)
		}
	}
	for _, s := range []string{
		"", "2024", "2024-1-1", "2023-02-29", "1900-02-29", "2024-13-01", "2024-00-10", "2024-01-01T", "2024-01-01T24:00", "2024-01-01T10:60",
		"2024-01-01T10:00:60", "2024-01-01T10:00:00.", "2024-01-01X10:00", "2024-01-01T10:00:00+", "2024-01-01T10:00:00+25:00", "2024-01-01T10:00 ", "01/02/2024", "2024-01-01T10:00:00Zx",
	} {
		if v, _, ok := events.ParseTime(s); ok {
			t.Errorf("%q read as %v", s, v)
		}
	}
}

func TestMoment(t *testing.T) {
	zone := time.FixedZone("z", 2*3600)
	m, ok := events.ParseMoment("1970-01-01T02:00", zone)
	if !ok || m.UTC != 0 || m.Wall != 7200e6 {
		t.Errorf("%+v", m)
	}
	if m, ok = events.ParseMoment("1970-01-01T00:00Z", zone); !ok || m.UTC != 0 || m.Wall != 7200e6 {
		t.Errorf("%+v", m)
	}
	for s, want := range map[string]int{"1970-01-01": -1, "1970-01-01T00:00Z": 0, "1970-01-01T02:00": 0, "1970-01-01T03:30+01": 1} {
		if sign, ok := m.Compare(s); !ok || sign != want {
			t.Errorf("%s: %d", s, sign)
		}
	}
	if _, ok := m.Compare("no time"); ok {
		t.Error("no time is compared")
	}
}

func FuzzParseTime(f *testing.F) {
	f.Add("2024-02-29T23:59:59.123456+01:00")
	f.Add("2024-02-29")
	f.Fuzz(func(t *testing.T, s string) {
		got, utc, ok := events.ParseTime(s)
		if want, err := time.Parse(time.RFC3339Nano, s); err == nil && want.Year() > 0 {
			_, offset := want.Zone()
			if offset < 0 {
				offset = -offset
			}
			if offset/3600 > 18 || len(s) < 20 {
				return
			}
			if !ok {
				return // the library also reads 2024-01-01T1:00:00Z and the like
			}
			if !utc || got != float64(want.UnixMicro()) {
				t.Errorf("%q: %v %v %v, want %v", s, got, utc, ok, want.UnixMicro())
			}
		}
	})
}
