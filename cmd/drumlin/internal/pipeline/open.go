package pipeline

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"drumlin/io/arrowfile"
	"drumlin/io/csvfile"
	"drumlin/io/events"
	"drumlin/io/parquetfile"
)

// openAll opens every input, in the order of their names, folders and globs
// expanded. On error everything opened so far is closed.
func openAll(inputs []string) (sources []events.Source, err error) {
	defer func() {
		if err != nil {
			closeAll(sources)
			sources = nil
		}
	}()
	var paths []string
	for _, in := range inputs {
		found, err := expand(in)
		if err != nil {
			return sources, err
		}
		paths = append(paths, found...)
	}
	slices.Sort(paths)
	for i, p := range paths {
		if i > 0 && p == paths[i-1] {
			return sources, &events.Fault{Kind: events.ErrSetting, File: p, What: "the same file is given twice", Remedy: "give it once"}
		}
		s, err := openOne(p)
		if err != nil {
			return sources, err
		}
		sources = append(sources, s)
	}
	return sources, nil
}

func closeAll(sources []events.Source) {
	for _, s := range sources {
		_ = s.Close() // read-only
	}
}

// expand returns the files behind an input: itself, a folder's files, or the
// matches of a glob. Names that start with a dot or an underscore are skipped
// in folders, as is the custom with partitioned extracts.
func expand(input string) ([]string, error) {
	info, err := os.Stat(input)
	switch {
	case err == nil && !info.IsDir():
		return []string{input}, nil
	case err == nil:
		var out []string
		err := filepath.WalkDir(input, func(p string, d fs.DirEntry, err error) error {
			if err != nil {
				return err
			}
			if name := d.Name(); p != input && (strings.HasPrefix(name, ".") || strings.HasPrefix(name, "_")) {
				if d.IsDir() {
					return fs.SkipDir
				}
				return nil
			}
			if d.Type().IsRegular() {
				out = append(out, p)
			}
			return nil
		})
		if err != nil {
			return nil, &events.Fault{Kind: events.ErrMissing, File: input, What: "the folder cannot be read", Cause: err}
		}
		if len(out) == 0 {
			return nil, &events.Fault{Kind: events.ErrMissing, File: input, What: "the folder holds no file", Remedy: "name a folder with Parquet or CSV files"}
		}
		return out, nil
	case errors.Is(err, fs.ErrNotExist) && strings.ContainsAny(input, "*?["):
		out, err := filepath.Glob(input)
		if err != nil {
			return nil, &events.Fault{Kind: events.ErrSetting, File: input, What: "the pattern cannot be read", Cause: err}
		}
		if len(out) == 0 {
			return nil, &events.Fault{Kind: events.ErrMissing, File: input, What: "no file matches the pattern"}
		}
		return out, nil
	case errors.Is(err, fs.ErrNotExist):
		return nil, &events.Fault{Kind: events.ErrMissing, File: input, What: "there is no such file", Remedy: "check the path"}
	}
	return nil, &events.Fault{Kind: events.ErrMissing, File: input, What: "the input cannot be opened", Cause: err}
}

// openOne tells the format from the content and opens the file.
func openOne(path string) (events.Source, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, &events.Fault{Kind: events.ErrMissing, File: path, What: "the input cannot be opened", Cause: err}
	}
	head := make([]byte, 4096)
	n, err := io.ReadFull(f, head)
	if err != nil && !errors.Is(err, io.ErrUnexpectedEOF) && !errors.Is(err, io.EOF) {
		f.Close()
		return nil, &events.Fault{Kind: events.ErrMissing, File: path, What: "the input cannot be read", Cause: err}
	}
	head = head[:n]
	var tail []byte
	if info, err := f.Stat(); err == nil && info.Size() >= 8 {
		tail = make([]byte, 8)
		if _, err := f.ReadAt(tail, info.Size()-8); err != nil {
			tail = nil
		}
	}
	f.Close()
	switch format := events.Sniff(head, tail); format {
	case events.FormatParquet:
		return parquetfile.Open(path, parquetfile.Options{})
	case events.FormatCSV:
		if strings.EqualFold(filepath.Ext(path), ".parquet") {
			return nil, &events.Fault{Kind: events.ErrMalformed, File: path, What: "named .parquet but holds text", Remedy: "give the file its right ending, or the right file"}
		}
		return csvfile.Open(path)
	case events.FormatArrowFile, events.FormatArrowStream:
		return arrowfile.Open(path, arrowfile.Options{})
	case events.FormatEmpty:
		return nil, &events.Fault{Kind: events.ErrMalformed, File: path, What: "the file is empty", Remedy: "check how it was made"}
	case events.FormatUnknown:
		return nil, &events.Fault{Kind: events.ErrMalformed, File: path, What: "the content is neither Parquet, Arrow nor text with columns", Remedy: "give a Parquet, Arrow or CSV file"}
	default:
		return nil, &events.Fault{Kind: events.ErrUnsupported, File: path, What: fmt.Sprintf("the content is %s, which is not read yet", format), Remedy: "give a Parquet, Arrow or CSV file"}
	}
}
