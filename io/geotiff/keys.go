package geotiff

import (
	"fmt"
	"strconv"
	"strings"

	"drumlin/spatial"
)

// GeoKey ids of OGC 19-008r4, and those of its predecessor that carry the
// parameters of a projection without a code.
const (
	keyModelType     = 1024
	keyRasterType    = 1025
	keyCitation      = 1026
	keyGeodeticCRS   = 2048
	keyAngularUnits  = 2054
	keyProjectedCRS  = 3072
	keyPCSCitation   = 3073
	keyProjection    = 3074
	keyMethod        = 3075
	keyLinearUnits   = 3076
	keyParallel1     = 3078
	keyParallel2     = 3079
	keyNatOriginLon  = 3080
	keyNatOriginLat  = 3081
	keyFE            = 3082
	keyFN            = 3083
	keyFalseLon      = 3084
	keyFalseLat      = 3085
	keyFalseEasting  = 3086
	keyFalseNorthing = 3087
	keyCentreLon     = 3088
	keyCentreLat     = 3089
	keyScale         = 3092

	userDefined = 32767
	projected   = 1
	geographic  = 2
	pixelIsArea = 1
	metre       = 9001
	degree      = 9102

	methodTM     = 1
	methodLCC2SP = 8
	methodLCC1SP = 9
	methodLAEA   = 10
	methodAEA    = 11
)

// keySet builds the three GeoKey tags. Keys must be added in rising order.
type keySet struct {
	dir     []uint16 // without its header
	doubles []float64
	ascii   string
}

func (k *keySet) short(id, v uint16) { k.dir = append(k.dir, id, 0, 1, v) }

func (k *keySet) double(id uint16, v float64) {
	k.dir = append(k.dir, id, tagGeoDoubles, 1, uint16(len(k.doubles)))
	k.doubles = append(k.doubles, v)
}

func (k *keySet) text(id uint16, s string) {
	s = ascii(s) + "|"
	k.dir = append(k.dir, id, tagGeoASCII, uint16(len(s)), uint16(len(k.ascii)))
	k.ascii += s
}

func (k *keySet) directory() []uint16 {
	return append([]uint16{1, 1, 0, uint16(len(k.dir) / 4)}, k.dir...)
}

// ascii keeps printable ASCII; the bar ends a GeoKey text.
func ascii(s string) string {
	return strings.Map(func(r rune) rune {
		if r < ' ' || r > '~' || r == '|' {
			return '_'
		}
		return r
	}, s)
}

// geoKeys says the CRS in GeoKeys.
func geoKeys(c spatial.CRS) (*keySet, error) {
	k := &keySet{}
	name := c.Name
	if name == "" {
		name = "unnamed"
	}
	if c.Method == "plane" {
		k.short(keyModelType, userDefined)
		k.short(keyRasterType, pixelIsArea)
		k.text(keyCitation, "plane without a place, metres")
		k.short(keyLinearUnits, metre)
		return k, nil
	}
	if c.ID != "" {
		code, err := epsg(c.ID)
		if err != nil {
			return nil, err
		}
		if c.Method == "geographic" {
			k.short(keyModelType, geographic)
			k.short(keyRasterType, pixelIsArea)
			k.text(keyCitation, name)
			k.short(keyGeodeticCRS, code)
			return k, nil
		}
		k.short(keyModelType, projected)
		k.short(keyRasterType, pixelIsArea)
		k.text(keyCitation, name)
		k.short(keyProjectedCRS, code)
		return k, nil
	}
	return userKeys(k, c, name)
}

func epsg(id string) (uint16, error) {
	digits, ok := strings.CutPrefix(id, "EPSG:")
	code, err := strconv.ParseUint(digits, 10, 16)
	if !ok || err != nil || code < 1024 || code >= userDefined {
		return 0, fmt.Errorf("geotiff: CRS %q is not an EPSG code a GeoTIFF can hold: %w", id, ErrUnsupported)
	}
	return uint16(code), nil
}

// userKeys spells out a projection that has no code.
func userKeys(k *keySet, c spatial.CRS, name string) (*keySet, error) {
	var base uint16
	switch c.Ellipsoid {
	case "WGS 84":
		base = 4326
	case "GRS 80":
		base = 4019 // unknown datum on that ellipsoid
	default:
		return nil, fmt.Errorf("geotiff: a plane without a code on the ellipsoid %q: %w", c.Ellipsoid, ErrUnsupported)
	}
	var method uint16
	switch c.Method {
	case "LAEA":
		method = methodLAEA
	case "AEA":
		method = methodAEA
	case "TM":
		method = methodTM
	case "LCC":
		method = methodLCC2SP
		if c.Lat1 == c.Lat2 && c.Lat0 == c.Lat1 && c.K0 != 0 {
			method = methodLCC1SP
		}
	default:
		return nil, fmt.Errorf("geotiff: a plane by the method %q without an EPSG code: %w", c.Method, ErrUnsupported)
	}
	k.short(keyModelType, projected)
	k.short(keyRasterType, pixelIsArea)
	k.text(keyCitation, name)
	k.short(keyGeodeticCRS, base)
	k.short(keyAngularUnits, degree)
	k.short(keyProjectedCRS, userDefined)
	k.text(keyPCSCitation, name)
	k.short(keyProjection, userDefined)
	k.short(keyMethod, method)
	k.short(keyLinearUnits, metre)
	switch method {
	case methodLAEA:
		k.double(keyFE, c.FE)
		k.double(keyFN, c.FN)
		k.double(keyCentreLon, c.Lon0)
		k.double(keyCentreLat, c.Lat0)
	case methodAEA:
		k.double(keyParallel1, c.Lat1)
		k.double(keyParallel2, c.Lat2)
		k.double(keyNatOriginLon, c.Lon0)
		k.double(keyNatOriginLat, c.Lat0)
		k.double(keyFE, c.FE)
		k.double(keyFN, c.FN)
	case methodLCC2SP:
		k.double(keyParallel1, c.Lat1)
		k.double(keyParallel2, c.Lat2)
		k.double(keyFalseLon, c.Lon0)
		k.double(keyFalseLat, c.Lat0)
		k.double(keyFalseEasting, c.FE)
		k.double(keyFalseNorthing, c.FN)
	case methodTM, methodLCC1SP:
		k.double(keyNatOriginLon, c.Lon0)
		k.double(keyNatOriginLat, c.Lat0)
		k.double(keyFE, c.FE)
		k.double(keyFN, c.FN)
		k.double(keyScale, c.K0)
	}
	return k, nil
}
