package pipeline

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"drumlin/io/arrowfile"
	"drumlin/io/bundle"
	"drumlin/io/csvfile"
	"drumlin/io/events"
	"drumlin/io/geoparquet"
	"drumlin/io/packed"
	"drumlin/io/parquetfile"
	"drumlin/io/partition"
)

// openAll opens every input, in the order of their names, folders and globs
// expanded. On error everything opened so far is closed.
func openAll(ctx context.Context, inputs []string) (sources []events.Source, err error) {
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
		s, err := openOne(ctx, p)
		if err != nil {
			return sources, err
		}
		sources = append(sources, s)
	}
	return partition.Wrap(sources, paths), nil
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
	case input == stdinName:
		return []string{input}, nil
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

// sniffed says what a file holds, by its first and last bytes.
func sniffed(path string) (string, error) {
	f, err := os.Open(path)
	if err != nil {
		return "", &events.Fault{Kind: events.ErrMissing, File: path, What: "the input cannot be opened", Cause: err}
	}
	defer f.Close()
	head := make([]byte, sniffBytes)
	n, err := io.ReadFull(f, head)
	if err != nil && !errors.Is(err, io.ErrUnexpectedEOF) && !errors.Is(err, io.EOF) {
		return "", &events.Fault{Kind: events.ErrMissing, File: path, What: "the input cannot be read", Cause: err}
	}
	var tail []byte
	if info, err := f.Stat(); err == nil && info.Size() >= 8 {
		tail = make([]byte, 8)
		if _, err := f.ReadAt(tail, info.Size()-8); err != nil {
			tail = nil
		}
	}
	return events.Sniff(head[:n], tail), nil
}

const sniffBytes = 4096

// openOne tells the format from the content and opens the file; "-" is standard
// input, kept in a temporary file so that it can be read twice.
func openOne(ctx context.Context, path string) (events.Source, error) {
	if path != stdinName {
		return openFile(ctx, path)
	}
	temp, err := spool(ctx, os.Stdin, stdinName)
	if err != nil {
		return nil, err
	}
	s, err := openFile(ctx, temp)
	if err != nil {
		_ = os.Remove(temp) // the first error is the one to tell
		return nil, packed.Rename(err, temp, "standard input")
	}
	i := s.Info()
	return &packed.Spooled{Source: s, Name: stdinName, Format: i.Format, Bytes: -1, Digest: temp, Temp: temp}, nil
}

const stdinName = "-"

func openFile(ctx context.Context, path string) (events.Source, error) {
	format, err := sniffed(path)
	if err != nil {
		return nil, err
	}
	if format == events.FormatGzip || format == events.FormatZstd {
		return openPacked(ctx, path, format)
	}
	s, err := openPlain(path, format)
	if err == nil && format == events.FormatCSV && strings.EqualFold(filepath.Ext(path), ".parquet") {
		return nil, &events.Fault{Kind: events.ErrMalformed, File: path, What: "named .parquet but holds text", Remedy: "give the file its right ending, or the right file"}
	}
	return s, err
}

// openPlain opens a file that is not packed.
func openPlain(path, format string) (events.Source, error) {
	switch format {
	case events.FormatParquet:
		return geoparquet.Open(path, parquetfile.Options{})
	case events.FormatCSV:
		return csvfile.Open(path)
	case events.FormatArrowFile, events.FormatArrowStream:
		return arrowfile.Open(path, arrowfile.Options{})
	case events.FormatEmpty:
		return nil, &events.Fault{Kind: events.ErrMalformed, File: path, What: "the file is empty", Remedy: "check how it was made"}
	case events.FormatUnknown:
		return nil, &events.Fault{Kind: events.ErrMalformed, File: path, What: "the content is neither Parquet, Arrow nor text with columns", Remedy: "give a Parquet, Arrow or CSV file"}
	}
	return nil, &events.Fault{Kind: events.ErrUnsupported, File: path, What: fmt.Sprintf("the content is %s, which is not read yet", format), Remedy: "give a Parquet, Arrow or CSV file"}
}

// openPacked opens a gzip or zstd file: text is unpacked anew for every pass,
// other formats into a temporary file, for they are read out of order.
func openPacked(ctx context.Context, path, format string) (events.Source, error) {
	broken := func(err error) error {
		return &events.Fault{Kind: events.ErrMalformed, File: path, What: "the " + format + " content cannot be unpacked", Remedy: "write the file again or leave it out", Cause: err}
	}
	head, err := packed.Head(path, format, sniffBytes)
	if err != nil {
		return nil, broken(err)
	}
	within := events.Sniff(head, nil)
	if within == events.FormatCSV {
		unpack := func(r io.Reader) (io.ReadCloser, error) { return packed.Reader(format, r) }
		return csvfile.OpenPacked(path, unpack, events.FormatCSV+" in "+format)
	}
	if within != events.FormatParquet && within != events.FormatArrowFile && within != events.FormatArrowStream {
		_, err := openPlain(path, within)
		var f *events.Fault
		if errors.As(err, &f) {
			f.What += " (within " + format + ")"
		}
		return nil, err
	}
	in, err := os.Open(path)
	if err != nil {
		return nil, &events.Fault{Kind: events.ErrMissing, File: path, What: "the input cannot be opened", Cause: err}
	}
	defer in.Close()
	z, err := packed.Reader(format, in)
	if err != nil {
		return nil, broken(err)
	}
	defer z.Close()
	temp, err := spool(ctx, z, path)
	if err != nil {
		return nil, err
	}
	s, err := openPlain(temp, within)
	if err != nil {
		_ = os.Remove(temp) // the first error is the one to tell
		return nil, packed.Rename(err, temp, path)
	}
	size := int64(-1)
	if info, err := in.Stat(); err == nil {
		size = info.Size()
	}
	return &packed.Spooled{Source: s, Name: path, Format: within + " in " + format, Bytes: size, Digest: path, Temp: temp}, nil
}

// spool keeps a stream in a temporary file.
func spool(ctx context.Context, r io.Reader, name string) (string, error) {
	temp, err := packed.Spool(ctx, r)
	switch {
	case err == nil:
		return temp, nil
	case errors.Is(err, packed.ErrSpool):
		return "", fmt.Errorf("%s: %w: %w", name, bundle.ErrOutput, err)
	case ctx.Err() != nil:
		return "", ctx.Err()
	}
	return "", &events.Fault{Kind: events.ErrMalformed, File: name, What: "the stream cannot be read to its end", Remedy: "check how it was made", Cause: err}
}
