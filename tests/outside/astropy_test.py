#!/usr/bin/python3
"""Sidereal time, geodesy and delays against ERFA and Astropy, computed live. UT1 = UTC and no polar motion on both sides; the
light travel time between published stations A and B is 10.01 ms (Anderson et al. 2001, from memory)."""
import os, subprocess, sys
import erfa
import numpy as np

top = os.path.realpath(os.path.join(os.path.dirname(__file__), '..', '..'))
build = os.path.realpath(os.environ.get('QB_BUILD', os.path.join(top, 'build')))
helper = os.path.join(build, 'tests', 'outside', 'wave_earth_helper')
count, failed = 0, 0


def ok(good, text):
    global count, failed
    count += 1
    failed += not good
    print(('ok' if good else 'not ok'), count, text)


def ours(*args):
    return [float(x) for x in subprocess.run([helper, *map(str, args)], capture_output=True, text=True, check=True).stdout.split()]


def leap(gps):
    from astropy.time import Time
    t = Time(gps, format='gps')
    return round((t.tai - Time(t.utc.iso, scale='tai')).sec) - 19


worst = 0
for gps in (0, 100000000, 630763213, 1000000000, 1187008882, 1487894418, 1800000000):
    n = leap(gps)
    utc = (2444244.5 + (gps - n) // 86400, (gps - n) % 86400 / 86400)
    tt = (2444244.5 + gps // 86400, (gps % 86400 + 51.184) / 86400)
    theirs = erfa.gmst06(utc[0], utc[1], tt[0], tt[1])
    worst = max(worst, abs(ours('gmst', gps)[0] - theirs))
ok(worst < 1e-9, 'Greenwich mean sidereal time against ERFA gmst06: %.1e rad' % worst)

from astropy.coordinates import EarthLocation
import astropy.units as u
worst = 0
sites = [(46.455146667, -119.407657139, 142.554), (30.562894333, -90.774240389, -6.574), (43.631414472, 10.504496611, 51.884),
         (54.45, -3.21, 120), (-89.9, 179.9, 4000), (0, 0, 0)]
for lat, lon, h in sites:
    e = EarthLocation.from_geodetic(lon * u.deg, lat * u.deg, h * u.m, ellipsoid='WGS84')
    worst = max(worst, np.abs(np.array(ours('site', lat, lon, h)) - np.array([e.x.value, e.y.value, e.z.value])).max())
ok(worst < 1e-6, 'WGS-84 positions against Astropy: %.1e m' % worst)

worst = 0
rng = np.random.default_rng(7)
for gps in (1000000000, 1187008882, 1487894418):
    n = leap(gps)
    utc = (2444244.5 + (gps - n) // 86400, (gps - n) % 86400 / 86400)
    tt = (2444244.5 + gps // 86400, (gps % 86400 + 51.184) / 86400)
    to_terrestrial = erfa.c2t06a(tt[0], tt[1], utc[0], utc[1], 0, 0)
    for lat, lon, h in sites[:4]:
        ra, dec = rng.uniform(0, 2 * np.pi), np.arcsin(rng.uniform(-1, 1))
        e = EarthLocation.from_geodetic(lon * u.deg, lat * u.deg, h * u.m, ellipsoid='WGS84')
        direction = to_terrestrial @ np.array([np.cos(dec) * np.cos(ra), np.cos(dec) * np.sin(ra), np.sin(dec)])
        theirs = -direction @ np.array([e.x.value, e.y.value, e.z.value]) / 299792458.0
        worst = max(worst, abs(ours('delay', gps, lat, lon, h, repr(ra), repr(dec))[0] - theirs))
ok(worst < 1e-10, 'delays from Earth\'s centre against ERFA c2t06a: %.1e s' % worst)

light = ours('light', *sites[0], *sites[1])[0]
ok(abs(light - 10.01e-3) < 0.005e-3, 'light travel time between published stations A and B: %.4f ms' % (light * 1e3))
sys.exit(failed > 0)
