package parquetfile

// Coder turns stored byte strings into numbers, so that columns of text or of
// binary geometry travel on the same path as columns of numbers.
type Coder interface {
	// Code returns the number that stands for b. It must not keep b.
	Code(b []byte) float64
	// Keep makes the codes given so far, those of a dictionary, outlive Next.
	Keep()
	// Next starts a batch: codes given since Keep are no longer in use.
	Next()
}
