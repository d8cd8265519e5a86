package pipeline

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"fmt"
	"hash"
	"io"
	"os"

	"drumlin/io/bundle"
	"drumlin/io/record"
	"drumlin/io/report"
)

// noted counts and digests what goes to a file of the bundle, for the report,
// which is written before the bundle knows its own digests.
type noted struct {
	io.Writer
	hash  hash.Hash
	bytes int64
}

func note(w io.Writer) *noted { return &noted{Writer: w, hash: sha256.New()} }

func (n *noted) Write(b []byte) (int, error) {
	k, err := n.Writer.Write(b)
	n.hash.Write(b[:k])
	n.bytes += int64(k)
	return k, err
}

func (n *noted) file(name string) record.File {
	return record.File{Name: name, Bytes: n.bytes, SHA256: hex.EncodeToString(n.hash.Sum(nil))}
}

// writeReport puts report.html into the bundle and returns the picture, if one
// was asked for, so that it can be written once the bundle stands.
func (r *run) writeReport(b *bundle.Bundle, page report.Page) (picture []byte, err error) {
	w, err := b.File("report.html", bundle.Varies)
	if err != nil {
		return nil, err
	}
	if err := report.WriteHTML(w, page); err != nil {
		_ = w.Close() // the first error is the one to tell
		return nil, fmt.Errorf("report.html: %w", err)
	}
	if err := w.Close(); err != nil {
		return nil, err
	}
	if r.settings.PNG == "" {
		return nil, nil
	}
	var buf bytes.Buffer
	err = report.WritePNG(&buf, page, report.PNGOptions{})
	return buf.Bytes(), err
}

// pagePeriod is the period as the page words it: the window asked for where it
// was given, else from the first to the last event.
func pagePeriod(rec *record.Record) *report.Period {
	p := rec.Period
	if p == nil {
		return nil
	}
	out := &report.Period{From: p.From, Until: p.Until, Zone: p.Zone}
	if out.From == "" {
		out.From = p.First
	}
	if out.Until == "" {
		out.Until, out.Through = p.Last, true
	}
	return out
}

// checkPicture refuses a picture that could not be written in the end, before
// the work.
func (r *run) checkPicture() error {
	if r.settings.PNG == "" || r.settings.Replace {
		return nil
	}
	if _, err := os.Lstat(r.settings.PNG); err == nil {
		return fmt.Errorf("%s exists; name another picture or say --replace: %w", r.settings.PNG, bundle.ErrExists)
	}
	return nil
}

// writePicture writes what writeReport drew.
func (r *run) writePicture(ctx context.Context, picture []byte) error {
	if r.settings.PNG == "" {
		return nil
	}
	return bundle.WriteFile(ctx, r.settings.PNG, r.settings.Replace, func(w io.Writer) error {
		_, err := w.Write(picture)
		return err
	})
}
