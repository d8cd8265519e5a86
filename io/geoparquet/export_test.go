package geoparquet

// WriteLayer writes a layer made in a test.
var WriteLayer = write
