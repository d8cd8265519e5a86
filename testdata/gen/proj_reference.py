#!/usr/bin/python3
"""Makes testdata/reference/proj_reference.csv: projected coordinates by PROJ.

Usage, from the top of the source tree (Debian packages python3, proj-bin):

    python3 testdata/gen/proj_reference.py > testdata/reference/proj_reference.csv
    python3 testdata/gen/proj_reference.py 2000 > big.csv    # so many points for each system

For every EPSG code in drumlin's table it asks projinfo for name and
parameters, draws positions (fixed seeds), and lets cs2cs project them on the
system's own ellipsoid, without a datum shift. Groups without an EPSG code try
aspects and ellipsoids that no code in the table uses.
"""
import random
import re
import subprocess
import sys

MANY = [3035, 3577, 5070, 2154, 3347, 2180, 3857, 6931, 32631, 32756]
FEW = [
    3571, 3572, 3573, 3574, 3575, 3576, 6932,
    3005, 3153, 3174, 3310, 3338, 3578, 6350, 9473,
    9793, 3034, 3057, 3112, 3301, 3416, 3812, 3978, 3979, 4839, 5243, 6372, 32118, 32198,
    2157, 2193, 3006, 3059, 3067, 3346, 3400, 3401, 3763, 3765, 3794, 5179, 5186, 25884,
    *range(6669, 6688),
    32601, 32618, 32660, 32701, 32760, 25828, 25832, 25838, 26901, 26917, 26923,
    6339, 6348, 31965, 31976, 31977, 31985, 28348, 28355, 28358, 7846, 7859,
]
OWN = [
    ("oblique LAEA across the antimeridian", "+proj=laea +lat_0=-21 +lon_0=178 +ellps=WGS84"),
    ("equatorial LAEA", "+proj=laea +lat_0=0 +lon_0=100 +x_0=1000 +y_0=2000 +ellps=WGS84"),
    ("polar LAEA", "+proj=laea +lat_0=-90 +lon_0=-60 +ellps=clrk66"),
    ("LAEA 1 degree off the pole", "+proj=laea +lat_0=89 +lon_0=15 +ellps=GRS80"),
    ("Albers with one parallel", "+proj=aea +lat_0=10 +lon_0=20 +lat_1=-30 +lat_2=-30 +ellps=intl"),
    ("LCC with one parallel and a scale", "+proj=lcc +lat_0=18 +lon_0=-77 +lat_1=18 +k_0=0.99995 +x_0=250000 +y_0=150000 +ellps=clrk66"),
    ("LCC in the south", "+proj=lcc +lat_0=-60 +lon_0=170 +lat_1=-40 +lat_2=-70 +ellps=bessel"),
    ("transverse Mercator on Airy", "+proj=tmerc +lat_0=49 +lon_0=-2 +k=0.9996012717 +x_0=400000 +y_0=-100000 +ellps=airy"),
    ("transverse Mercator across the antimeridian", "+proj=tmerc +lat_0=-10 +lon_0=179 +k=1 +ellps=krass"),
]


def output(*command, text=None):
    return subprocess.run(command, input=text, check=True, capture_output=True, text=True).stdout


def epsg(code):
    wkt = output("projinfo", f"EPSG:{code}", "-o", "WKT2:2019", "-q", "--single-line")
    name = re.match(r'[A-Z]+\["([^"]*)"', wkt).group(1)
    proj = output("projinfo", f"EPSG:{code}", "-o", "PROJ", "-q").split("\n")[0]
    proj = re.sub(r" \+(towgs84=\S+|no_defs|type=crs|units=m|wktext|nadgrids=\S+)", "", proj)
    proj = proj.replace("+datum=WGS84", "+ellps=WGS84").replace("+datum=NAD83", "+ellps=GRS80")
    return name, proj


def box(p):
    lon0 = float(p.get("lon_0", 6 * int(p.get("zone", 0)) - 183))
    lat0, method = float(p.get("lat_0", 0)), p["proj"]
    if method == "webmerc" or p.get("a") == "6378137" and method == "merc":
        return -180, 180, -85, 85
    if method in ("utm", "tmerc"):
        return lon0 - 10, lon0 + 10, -85, 85
    if method == "laea":
        return lon0 - 180, lon0 + 180, max(-90, lat0 - 70), min(90, lat0 + 70)
    south = float(p["lat_1"]) < 0
    return (lon0 - 100, lon0 + 100, -88, 40) if south else (lon0 - 100, lon0 + 100, -40, 88)


def group(label, name, proj, n, seed):
    p = dict(w.lstrip("+").partition("=")[::2] for w in proj.split())
    west, east, south, north = box(p)
    draw = random.Random(seed)
    points = []
    for _ in range(n):
        lon = round(draw.uniform(west, east), 4)
        lon = round(lon + 360 if lon < -180 else lon - 360 if lon > 180 else lon, 4)
        points.append((lon, round(draw.uniform(south, north), 4)))
    ellps = "+ellps=" + p["ellps"] if "ellps" in p else "+ellps=WGS84"
    text = "".join(f"{lon:.4f} {lat:.4f}\n" for lon, lat in points)
    back = output("cs2cs", "-f", "%.4f", "+proj=longlat", ellps, "+to", *proj.split(), text=text)
    print(f"# {label};{name};{proj}")
    for (lon, lat), line in zip(points, back.splitlines(), strict=True):
        x, y = line.split()[:2]
        print(f"{lon:.4f},{lat:.4f},{x},{y}")


def main():
    n = int(sys.argv[1]) if len(sys.argv) > 1 else 0
    version = subprocess.run(["cs2cs"], capture_output=True, text=True).stderr.split(",")[0]
    print("# Reference values for map projections. Made by testdata/gen/proj_reference.py with PROJ " + version)
    print("# as: cs2cs -f %.4f +proj=longlat +ellps=(of the system) +to (parameters in the group's heading)")
    print("# Columns: longitude, latitude (degrees), easting, northing (metres).")
    for code in MANY + FEW:
        name, proj = epsg(code)
        if code == 3857:
            proj = "+proj=webmerc +ellps=WGS84"
        group(f"EPSG:{code}", name, proj, n or (250 if code in MANY else 25), code)
    for i, (name, proj) in enumerate(OWN):
        group("own", name, proj, n or 100, i)


main()
