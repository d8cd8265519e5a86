package parquetfile

// Options bounds what a file may make the reader do. The zero value is the
// default of every field.
type Options struct {
	BatchRows      int   // rows in a batch; default 32768
	MaxFooterBytes int64 // largest footer read; default 64 MiB
	MaxPageBytes   int64 // largest page, stored or unpacked; default 256 MiB
	MaxChunkBytes  int64 // largest chunk, unpacked; default 8 GiB
}

func (o Options) filled() Options {
	if o.BatchRows <= 0 {
		o.BatchRows = 32768
	}
	if o.MaxFooterBytes <= 0 {
		o.MaxFooterBytes = 64 << 20
	}
	if o.MaxPageBytes <= 0 {
		o.MaxPageBytes = 256 << 20
	}
	o.MaxPageBytes = min(o.MaxPageBytes, 1<<31-1)
	if o.MaxChunkBytes <= 0 {
		o.MaxChunkBytes = 8 << 30
	}
	return o
}
