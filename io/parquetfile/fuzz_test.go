package parquetfile_test

import (
	"encoding/binary"
	"os"
	"path/filepath"
	"testing"

	"drumlin/io/parquetfile"
)

func fuzzSeeds(f *testing.F) [][]byte {
	quake, err := os.ReadFile(quakes)
	if err != nil {
		f.Fatal(err)
	}
	out := [][]byte{quake}
	for _, o := range []parquetfile.WriteOptions{{}, {Dictionary: true, PageV2: true}} {
		data, _ := sample(f, o) // small files: the engine cuts each find down
		out = append(out, data)
	}
	return out
}

// FuzzParquet: whatever the bytes, the answer is rows or a fault.
func FuzzParquet(f *testing.F) {
	for _, s := range fuzzSeeds(f) {
		f.Add(s)
	}
	path := filepath.Join(f.TempDir(), "a.parquet")
	f.Fuzz(func(t *testing.T, data []byte) {
		if err := os.WriteFile(path, data, 0o600); err != nil {
			t.Fatal(err)
		}
		drain(t, path, tight)
	})
}

// FuzzFooter: the bytes are the footer of a file whose frame and data hold.
func FuzzFooter(f *testing.F) {
	seeds := fuzzSeeds(f)
	body := func(b []byte) ([]byte, []byte) {
		n := int(binary.LittleEndian.Uint32(b[len(b)-8:]))
		return b[:len(b)-8-n], b[len(b)-8-n : len(b)-8]
	}
	front, _ := body(seeds[0])
	for _, s := range seeds {
		_, foot := body(s)
		f.Add(foot)
	}
	path := filepath.Join(f.TempDir(), "a.parquet")
	f.Fuzz(func(t *testing.T, foot []byte) {
		b := append(append([]byte(nil), front...), foot...)
		b = binary.LittleEndian.AppendUint32(b, uint32(len(foot)))
		if err := os.WriteFile(path, append(b, "PAR1"...), 0o600); err != nil {
			t.Fatal(err)
		}
		drain(t, path, tight)
	})
}
