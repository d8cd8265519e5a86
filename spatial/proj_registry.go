package spatial

import "fmt"

// familiesKnown tells a person what LookupCRS knows.
const familiesKnown = "known are geographic degrees (4326, 4258, 4269, OGC:CRS84 and others), " +
	"UTM on WGS 84 (32601-32660, 32701-32760), ETRS89 (25828-25838), NAD83 (26901-26923), " +
	"SIRGAS 2000 (31965-31985) and GDA (28348-28358, 7846-7859), " +
	"national grids on these datums (such as 2154, 2180, 2193, 3006, 3067, 3347, 5070, 3577), " +
	"JGD2011 (6669-6687), 3034, 3035 and 3857"

// All parameters are those of the EPSG data set, checked against PROJ's copy
// by the reference values in testdata.

// geographic holds the systems in degrees; see LookupCRS on their datums.
var geographic = map[int]string{
	4326: "WGS 84", 4979: "WGS 84", 4258: "ETRS89", 4269: "NAD83",
	4171: "RGF93 v1", 4619: "SWEREF99", 4617: "NAD83(CSRS)", 6318: "NAD83(2011)",
	4283: "GDA94", 7844: "GDA2020", 4167: "NZGD2000", 4674: "SIRGAS 2000",
	6668: "JGD2011", 4737: "Korea 2000", 4490: "CGCS2000",
}

// utm lists the families of UTM codes: the code of zone z is base + z.
var utm = []struct {
	base, from, to int
	name           string
	ellipsoid      string
	south          bool
}{
	{32600, 1, 60, "WGS 84 / UTM zone %dN", "WGS 84", false},
	{32700, 1, 60, "WGS 84 / UTM zone %dS", "WGS 84", true},
	{25800, 28, 38, "ETRS89 / UTM zone %dN", "GRS 80", false},
	{26900, 1, 23, "NAD83 / UTM zone %dN", "GRS 80", false},
	{6329, 10, 19, "NAD83(2011) / UTM zone %dN", "GRS 80", false},
	{31954, 11, 22, "SIRGAS 2000 / UTM zone %dN", "GRS 80", false},
	{31960, 17, 25, "SIRGAS 2000 / UTM zone %dS", "GRS 80", true},
	{28300, 48, 58, "GDA94 / MGA zone %d", "GRS 80", true},
	{7800, 46, 59, "GDA2020 / MGA zone %d", "GRS 80", true},
}

// grids holds the systems with parameters of their own.
var grids = map[int]CRS{
	3857: {Name: "WGS 84 / Pseudo-Mercator", Method: "WebMercator", Ellipsoid: "WGS 84"},

	//                 name                                                lat0  lon0      FE       FN
	3035: laeaGRS80("ETRS89-extended / LAEA Europe", 52, 10, 4321000, 3210000),
	3571: laeaWGS84("WGS 84 / North Pole LAEA Bering Sea", 90, 180),
	3572: laeaWGS84("WGS 84 / North Pole LAEA Alaska", 90, -150),
	3573: laeaWGS84("WGS 84 / North Pole LAEA Canada", 90, -100),
	3574: laeaWGS84("WGS 84 / North Pole LAEA Atlantic", 90, -40),
	3575: laeaWGS84("WGS 84 / North Pole LAEA Europe", 90, 10),
	3576: laeaWGS84("WGS 84 / North Pole LAEA Russia", 90, 90),
	6931: laeaWGS84("WGS 84 / NSIDC EASE-Grid 2.0 North", 90, 0),
	6932: laeaWGS84("WGS 84 / NSIDC EASE-Grid 2.0 South", -90, 0),

	// name, lat0, lon0, lat1, lat2, FE, FN
	3005: aea("NAD83 / BC Albers", 45, -126, 50, 58.5, 1000000, 0),
	3153: aea("NAD83(CSRS) / BC Albers", 45, -126, 50, 58.5, 1000000, 0),
	3174: aea("NAD83 / Great Lakes Albers", 45.568977, -84.455955, 42.122774, 49.01518, 1000000, 1000000),
	3310: aea("NAD83 / California Albers", 0, -120, 34, 40.5, 0, -4000000),
	3338: aea("NAD83 / Alaska Albers", 50, -154, 55, 65, 0, 0),
	3577: aea("GDA94 / Australian Albers", 0, 132, -18, -36, 0, 0),
	3578: aea("NAD83 / Yukon Albers", 59, -132.5, 61+40./60, 68, 500000, 500000),
	5070: aea("NAD83 / Conus Albers", 23, -96, 29.5, 45.5, 0, 0),
	6350: aea("NAD83(2011) / Conus Albers", 23, -96, 29.5, 45.5, 0, 0),
	9473: aea("GDA2020 / Australian Albers", 0, 132, -18, -36, 0, 0),

	2154:  lcc("RGF93 v1 / Lambert-93", 46.5, 3, 49, 44, 700000, 6600000),
	9793:  lcc("RGF93 v2 / Lambert-93", 46.5, 3, 49, 44, 700000, 6600000),
	3034:  lcc("ETRS89-extended / LCC Europe", 52, 10, 35, 65, 4000000, 2800000),
	3057:  lcc("ISN93 / Lambert 1993", 65, -19, 64.25, 65.75, 500000, 500000),
	3112:  lcc("GDA94 / Geoscience Australia Lambert", 0, 134, -18, -36, 0, 0),
	3416:  lcc("ETRS89 / Austria Lambert", 47.5, 13+20./60, 49, 46, 400000, 400000),
	32118: lcc("NAD83 / New York Long Island", 40+10./60, -74, 41+2./60, 40+40./60, 300000, 0),
	32198: lcc("NAD83 / Quebec Lambert", 44, -68.5, 60, 46, 0, 0),
	3301:  lcc("Estonian Coordinate System of 1997", 57+31./60+3.19415/3600, 24, 59+20./60, 58, 500000, 6375000),
	3347:  lcc("NAD83 / Statistics Canada Lambert", 63.390675, -(91 + 52./60), 49, 77, 6200000, 3000000),
	3812:  lcc("ETRS89 / Belgian Lambert 2008", 50.797815, 4+21./60+33.177/3600, 49+50./60, 51+10./60, 649328, 665262),
	3978:  lcc("NAD83 / Canada Atlas Lambert", 49, -95, 49, 77, 0, 0),
	3979:  lcc("NAD83(CSRS) / Canada Atlas Lambert", 49, -95, 49, 77, 0, 0),
	4839:  lcc("ETRS89 / LCC Germany (N-E)", 51, 10.5, 48+40./60, 53+40./60, 0, 0),
	5243:  lcc("ETRS89 / LCC Germany (E-N)", 51, 10.5, 48+40./60, 53+40./60, 0, 0),
	6372:  lcc("Mexico ITRF2008 / LCC", 12, -102, 17.5, 29.5, 2500000, 0),

	// name, lat0, lon0, k0, FE, FN
	2157:  tm("IRENET95 / Irish Transverse Mercator", 53.5, -8, 0.99982, 600000, 750000),
	2180:  tm("ETRF2000-PL / CS92", 0, 19, 0.9993, 500000, -5300000),
	2193:  tm("NZGD2000 / New Zealand Transverse Mercator 2000", 0, 173, 0.9996, 1600000, 10000000),
	3006:  tm("SWEREF99 TM", 0, 15, 0.9996, 500000, 0),
	3059:  tm("LKS92 / Latvia TM", 0, 24, 0.9996, 500000, -6000000),
	3067:  tm("ETRS89 / TM35FIN(E,N)", 0, 27, 0.9996, 500000, 0),
	3346:  tm("LKS94 / Lithuania TM", 0, 24, 0.9998, 500000, 0),
	3400:  tm("NAD83 / Alberta 10-TM (Forest)", 0, -115, 0.9992, 500000, 0),
	3401:  tm("NAD83 / Alberta 10-TM (Resource)", 0, -115, 0.9992, 0, 0),
	3763:  tm("ETRS89 / Portugal TM06", 39+40./60+5.73/3600, -(8 + 7./60 + 59.19/3600), 1, 0, 0),
	3765:  tm("HTRS96 / Croatia TM", 0, 16.5, 0.9999, 500000, 0),
	3794:  tm("Slovenia 1996 / Slovene National Grid", 0, 15, 0.9999, 500000, -5000000),
	5179:  tm("Korea 2000 / Unified CS", 38, 127.5, 0.9996, 1000000, 2000000),
	5186:  tm("Korea 2000 / Central Belt 2010", 38, 127, 1, 200000, 600000),
	25884: tm("ETRS89 / TM Baltic93", 0, 24, 0.9996, 500000, 0),
}

// japan holds the origins (latitude, longitude) of the zones of JGD2011 /
// Japan Plane Rectangular CS, EPSG:6669 and on; all have scale 0.9999 and no
// false origin.
var japan = [...][2]float64{
	{33, 129.5}, {33, 131}, {36, 132 + 10./60}, {33, 133.5}, {36, 134 + 20./60}, {36, 136}, {36, 137 + 10./60},
	{36, 138.5}, {36, 139 + 50./60}, {40, 140 + 50./60}, {44, 140.25}, {44, 142.25}, {44, 144.25}, {26, 142},
	{26, 127.5}, {26, 124}, {26, 131}, {20, 136}, {26, 154},
}

// refusals name what is known not to work and why.
var refusals = []struct {
	from, to int
	name     string
	needs    string
}{
	{27700, 27700, "OSGB36 / British National Grid", "the datum shift of OSGB36"},
	{4277, 4277, "OSGB36", "the datum shift of OSGB36"},
	{29900, 29903, "TM65 and TM75 / Irish Grid", "the datum shift of TM65 or TM75"},
	{4299, 4300, "TM65 and TM75", "the datum shift of TM65 or TM75"},
	{31370, 31370, "BD72 / Belgian Lambert 72", "the datum shift of BD72"},
	{4313, 4313, "BD72", "the datum shift of BD72"},
	{28991, 28992, "Amersfoort / RD", "the datum shift of Amersfoort and the oblique stereographic projection"},
	{7415, 7415, "Amersfoort / RD New with heights", "the datum shift of Amersfoort and the oblique stereographic projection"},
	{4289, 4289, "Amersfoort", "the datum shift of Amersfoort"},
	{21781, 21782, "CH1903 / LV03", "the datum shift of CH1903 and the Swiss oblique Mercator projection"},
	{2056, 2056, "CH1903+ / LV95", "the datum shift of CH1903+ and the Swiss oblique Mercator projection"},
	{4149, 4150, "CH1903 and CH1903+", "the datum shift of CH1903"},
	{31466, 31469, "DHDN / 3-degree Gauss-Kruger", "the datum shift of DHDN"},
	{4314, 4314, "DHDN", "the datum shift of DHDN"},
	{3068, 3068, "DHDN / Soldner Berlin", "the datum shift of DHDN"},
	{27561, 27564, "NTF (Paris) / Lambert", "the datum shift of NTF"},
	{27571, 27574, "NTF (Paris) / Lambert zone", "the datum shift of NTF"},
	{4275, 4275, "NTF", "the datum shift of NTF"},
	{23028, 23038, "ED50 / UTM", "the datum shift of ED50"},
	{4230, 4230, "ED50", "the datum shift of ED50"},
	{26701, 26722, "NAD27 / UTM", "the datum shift of NAD27"},
	{4267, 4267, "NAD27", "the datum shift of NAD27"},
	{9311, 9311, "NAD27 / US National Atlas Equal Area", "the datum shift of NAD27"},
	{2163, 2163, "US National Atlas Equal Area", "a sphere in place of the ellipsoid"},
	{3003, 3004, "Monte Mario / Italy", "the datum shift of Monte Mario"},
	{5514, 5514, "S-JTSK / Krovak East North", "the datum shift of S-JTSK and the Krovak projection"},
	{3844, 3844, "Pulkovo 1942(58) / Stereo70", "the datum shift of Pulkovo 1942(58) and the oblique stereographic projection"},
	{23700, 23700, "HD72 / EOV", "the datum shift of HD72 and the Swiss oblique Mercator projection"},
	{2100, 2100, "GGRS87 / Greek Grid", "the datum shift of GGRS87"},
	{2039, 2039, "Israel 1993 / Israeli TM Grid", "the datum shift of Israel 1993"},
	{2443, 2461, "JGD2000 / Japan Plane Rectangular CS", "the shift from JGD2000 to JGD2011 (up to 5 m)"},
	{4612, 4612, "JGD2000", "the shift from JGD2000 to JGD2011 (up to 5 m)"},
	{5880, 5880, "SIRGAS 2000 / Brazil Polyconic", "the polyconic projection"},
	{3031, 3031, "WGS 84 / Antarctic Polar Stereographic", "the polar stereographic projection"},
	{3995, 3996, "WGS 84 / Arctic Polar Stereographic", "the polar stereographic projection"},
	{3413, 3413, "WGS 84 / NSIDC Sea Ice Polar Stereographic North", "the polar stereographic projection"},
	{32661, 32661, "WGS 84 / UPS North", "the polar stereographic projection"},
	{32761, 32761, "WGS 84 / UPS South", "the polar stereographic projection"},
	{5041, 5042, "WGS 84 / UPS", "the polar stereographic projection"},
	{6933, 6933, "WGS 84 / NSIDC EASE-Grid 2.0 Global", "the cylindrical equal-area projection"},
	{8857, 8859, "WGS 84 / Equal Earth", "the Equal Earth projection"},
	{3395, 3395, "WGS 84 / World Mercator", "the ellipsoidal Mercator projection"},
	{2225, 2289, "a NAD83 state plane in feet", "coordinates in metres"},
	{4978, 4978, "WGS 84, geocentric", "geocentric coordinates"},
}

// registered returns the description of a code, without its ID.
func registered(epsg int) (CRS, bool) {
	if name, ok := geographic[epsg]; ok {
		c := CRS{Name: name, Method: "geographic", Ellipsoid: "GRS 80"}
		if name == "WGS 84" {
			c.Ellipsoid = "WGS 84"
		}
		return c, true
	}
	if c, ok := grids[epsg]; ok {
		return c, true
	}
	if z := epsg - 6669; z >= 0 && z < len(japan) {
		return tm(fmt.Sprintf("JGD2011 / Japan Plane Rectangular CS, zone %d", z+1), japan[z][0], japan[z][1], 0.9999, 0, 0), true
	}
	for _, f := range utm {
		if z := epsg - f.base; z >= f.from && z <= f.to {
			c := tm(fmt.Sprintf(f.name, z), 0, float64(6*z-183), 0.9996, 500000, 0)
			c.Ellipsoid = f.ellipsoid
			if f.south {
				c.FN = 10000000
			}
			return c, true
		}
	}
	return CRS{}, false
}

func laeaGRS80(name string, lat0, lon0, fe, fn float64) CRS {
	return CRS{Name: name, Method: "LAEA", Ellipsoid: "GRS 80", Lat0: lat0, Lon0: lon0, FE: fe, FN: fn}
}

func laeaWGS84(name string, lat0, lon0 float64) CRS {
	return CRS{Name: name, Method: "LAEA", Ellipsoid: "WGS 84", Lat0: lat0, Lon0: lon0}
}

func aea(name string, lat0, lon0, lat1, lat2, fe, fn float64) CRS {
	return CRS{Name: name, Method: "AEA", Ellipsoid: "GRS 80", Lat0: lat0, Lon0: lon0, Lat1: lat1, Lat2: lat2, FE: fe, FN: fn}
}

func lcc(name string, lat0, lon0, lat1, lat2, fe, fn float64) CRS {
	return CRS{Name: name, Method: "LCC", Ellipsoid: "GRS 80", Lat0: lat0, Lon0: lon0, Lat1: lat1, Lat2: lat2, FE: fe, FN: fn}
}

func tm(name string, lat0, lon0, k0, fe, fn float64) CRS {
	return CRS{Name: name, Method: "TM", Ellipsoid: "GRS 80", Lat0: lat0, Lon0: lon0, K0: k0, FE: fe, FN: fn}
}
