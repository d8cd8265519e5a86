package geotiff

// WriteSurface is the writer below the guard, for tests: a Release can only
// come from spatial.Guard.
var WriteSurface = writeSurface
