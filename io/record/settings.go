package record

import (
	"bytes"
	"encoding/json"
	"fmt"
)

// Setting is one setting as it took effect. Value is a string, a bool, an
// int, a float64 or a slice of these.
type Setting struct {
	Name  string
	Value any
}

// Settings keep the order in which they were put; in JSON they are one object.
// Settings that cannot change the result (workers, out, replace, quiet, json)
// have no place here, for the record would then differ between equal runs.
type Settings []Setting

// Get returns the value of a setting and whether it is there.
func (s Settings) Get(name string) (any, bool) {
	for _, v := range s {
		if v.Name == name {
			return v.Value, true
		}
	}
	return nil, false
}

// MarshalJSON writes an object with the members in slice order.
func (s Settings) MarshalJSON() ([]byte, error) {
	b := []byte{'{'}
	for i, v := range s {
		if i > 0 {
			b = append(b, ',')
		}
		name, err := json.Marshal(v.Name)
		if err != nil {
			return nil, err
		}
		val, err := json.Marshal(v.Value)
		if err != nil {
			return nil, fmt.Errorf("record: setting %s: %w", v.Name, err)
		}
		b = append(append(append(b, name...), ':'), val...)
	}
	return append(b, '}'), nil
}

// UnmarshalJSON reads an object and keeps the order of its members; a name
// that comes twice is an error. Numbers become float64.
func (s *Settings) UnmarshalJSON(data []byte) error {
	dec := json.NewDecoder(bytes.NewReader(data))
	t, err := dec.Token()
	if err != nil {
		return err
	}
	if t == nil {
		*s = nil
		return nil
	}
	if t != json.Delim('{') {
		return fmt.Errorf("record: settings: not an object")
	}
	var out Settings
	for dec.More() {
		t, err := dec.Token()
		if err != nil {
			return err
		}
		name := t.(string) // a member name, by the grammar
		if _, twice := out.Get(name); twice {
			return fmt.Errorf("record: settings: %q comes twice", name)
		}
		var v any
		if err := dec.Decode(&v); err != nil {
			return err
		}
		out = append(out, Setting{name, v})
	}
	*s = out
	return nil
}
