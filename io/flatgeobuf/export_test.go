package flatgeobuf

// WriteLayer writes a layer made in a test.
var WriteLayer = write
