"""Landing sites, obstacles, routes and weather of the invented place.

Coordinates are kilometres east and north of the terrain's south-west corner; bearings are on
the grid [degrees]. Elevations are read from the terrain, which is levelled at each site.
"""

from __future__ import annotations

UNKNOWN = None

# Runways and strips: (id, name, kind, status, east, north, grid bearing, length_m, properties)
# Properties: width_m, surface, slope_pct (rising towards the bearing), lit, arrival_height_ft,
# source, survey_date, review_due.
RUNWAYS = [
    ("tarvane-09-27", "Tarvane Aerodrome 09/27", "aerodrome", "open", 28.4, 30.05, 92.0, 1240.0,
     (30.0, "asphalt", 0.4, True, UNKNOWN, "Aerodrome survey", "2026-03-14", "2027-03-14")),
    ("tarvane-15-33", "Tarvane Aerodrome 15/33", "aerodrome", "open", 28.55, 30.2, 151.0, 720.0,
     (25.0, "grass", 0.0, False, UNKNOWN, "Aerodrome survey", "2026-03-14", "2027-03-14")),
    ("kelmoor", "Kelmoor Strip", "strip", "open", 20.6, 39.3, 101.0, 610.0,
     (20.0, "grass", 0.5, False, UNKNOWN, "Operator's survey on foot", "2026-02-21", "2027-02-21")),
    ("hesterlund", "Hesterlund Old Strip", "strip", "disused", 24.9, 14.35, 84.0, 640.0,
     (18.0, "gravel", 0.6, UNKNOWN, UNKNOWN, "Air photograph", "2026-01-30", UNKNOWN)),
    ("quillane", "Quillane Farm Strip", "strip", "private", 33.2, 55.3, 96.0, 480.0,
     (12.0, "grass", 1.2, False, 1200.0, "Owner's statement", "2026-04-02", "2026-10-02")),
    ("selwarn", "Selwarn High Strip", "strip", "private", 43.1, 43.05, 62.0, 430.0,
     (15.0, "gravel", 5.0, False, 1500.0, "Operator's survey on foot", "2026-02-09", "2027-02-09")),
    ("morrawen", "Morrawen Plateau Strip", "strip", "open", 29.4, 6.9, 78.0, 560.0,
     (20.0, "natural", 1.0, False, UNKNOWN, "Operator's survey on foot", "2026-02-10",
      "2027-02-10")),
    ("orrendale", "Orrendale Strip", "strip", "open", 56.6, 41.2, 140.0, 690.0,
     (23.0, "gravel", 0.8, False, UNKNOWN, "Operator's survey on foot", "2026-03-05",
      "2027-03-05")),
]  # fmt: skip

# Fields and water: (id, name, kind, status, east, north, grid bearing, length_m, properties)
AREAS = [
    ("fenwarrow", "Fenwarrow Meadow", "field", "surveyed", 24.9, 38.75, 95.0, 420.0,
     (130.0, "grass", 0.7, UNKNOWN, UNKNOWN, "Walked and photographed", "2026-04-18",
      "2026-11-01")),
    ("ostrell-common", "Ostrell Common", "field", "surveyed", 25.5, 29.0, 80.0, 380.0,
     (110.0, "grass", 0.3, UNKNOWN, UNKNOWN, "Walked and photographed", "2026-04-18",
      "2026-11-01")),
    ("cauldreth-flat", "Cauldreth Flat", "field", "candidate", 41.3, 27.3, 118.0, 300.0,
     (90.0, UNKNOWN, UNKNOWN, UNKNOWN, UNKNOWN, "Map study", UNKNOWN, UNKNOWN)),
    ("harrowen-field", "Harrowen Field", "field", "candidate", 20.3, 13.2, 70.0, 350.0,
     (120.0, "stubble", UNKNOWN, UNKNOWN, UNKNOWN, "Air photograph", "2026-01-30", UNKNOWN)),
    ("ostrell-water", "Ostrell Water", "water", "surveyed", 20.3, 30.3, 70.0, 1500.0,
     (350.0, "water", 0.0, UNKNOWN, UNKNOWN, "Harbour office", "2026-05-06", "2027-05-06")),
    ("lake-ilvane", "Lake Ilvane", "water", "candidate", 26.3, 54.55, 92.0, 3000.0,
     (500.0, "water", 0.0, UNKNOWN, UNKNOWN, "Map study", UNKNOWN, UNKNOWN)),
]  # fmt: skip

# A place of which hardly anything is known: (id, name, kind, status, east, north)
POINTS = [
    ("skerrowen", "Skerrowen Island Pasture", "field", "candidate", 7.36, 38.51),
]

TOWN = (21.7, 29.0, 0.9)  # Ostrell: east, north, radius
VILLAGES = [(27.3, 29.1, 0.35), (21.2, 39.9, 0.3), (31.6, 55.9, 0.25), (23.6, 13.6, 0.3)]

# Obstacles: (name, type, [(east, north)], height_ft, horizontal and vertical accuracy_ft, date)
OBSTACLES = [
    ("Harvane Ridge relay mast", "mast", [(26.65, 34.18)], 165, 50, 10, "2026-02-02"),
    ("Ostrell broadcast mast", "mast", [(22.9, 27.6)], 410, 20, 3, "2026-05-06"),
    ("Corravel snow gauge mast", "mast", [(46.36, 44.08)], 60, 250, 50, "2026-01-15"),
    ("Ostrell harbour crane", "crane", [(21.95, 30.0)], 215, 30, 10, "2026-05-06"),
    ("Ostrell spire", "tower", [(21.6, 28.8)], 130, 30, 10, "2026-05-06"),
    ("Tarvane valley power line", "power_line",
     [(23.6, 27.9), (24.0, 29.9), (24.2, 31.2), (24.4, 32.4)], 150, 100, 20, "2026-03-20"),
    ("Cauldreth power line", "power_line",
     [(37.4, 30.4), (38.4, 29.0), (39.6, 27.5), (40.4, 26.5)], 120, 250, 50, "2026-01-11"),
    ("Skerrowen Head wind turbine 1", "wind_turbine", [(15.3, 36.2)], 490, 20, 10, "2026-04-11"),
    ("Skerrowen Head wind turbine 2", "wind_turbine", [(15.8, 36.0)], 490, 20, 10, "2026-04-11"),
    ("Skerrowen Head wind turbine 3", "wind_turbine", [(16.3, 35.8)], 490, 20, 10, "2026-04-11"),
    ("Skerrowen Head wind turbine 4", "wind_turbine", [(15.6, 36.8)], 490, 20, 10, "2026-04-11"),
    ("Skerrowen Head wind turbine 5", "wind_turbine", [(16.1, 36.6)], 490, 20, 10, "2026-04-11"),
    ("Skerrowen Head wind turbine 6", "wind_turbine", [(16.6, 36.4)], 490, 20, 10, "2026-04-11"),
]  # fmt: skip

# The route: (name, east, north, altitude_ft)
ROUTE = [
    ("Tarvane", 28.4, 30.05, 2500),
    ("Ostrell", 22.0, 30.6, 4500),
    ("Kelmoor", 20.6, 39.3, 5500),
    ("Ridge Valley", 32.0, 39.4, 6500),
    ("Selwarn Pass", 47.35, 43.61, 8500),
    ("Orrendale", 56.6, 41.2, 5500),
]

WEATHER = {
    "light-easterly": {
        "name": "Light easterly",
        "valid": "2026-04-20T22:00:00Z",
        "note": "Invented. Light air off the mountains, little change with height.",
        "wind": [(0, 85, 3), (2500, 95, 7), (6000, 100, 11), (10000, 105, 15)],
    },
    "westerly": {
        "name": "Light westerly",
        "valid": "2026-04-21T09:00:00Z",
        "note": "Invented. Steady sea wind, backing and freshening a little with height.",
        "wind": [(0, 250, 6), (2000, 260, 10), (5000, 270, 14), (10000, 275, 22)],
    },
    "southerly-change": {
        "name": "Southerly change",
        "valid": "2026-04-22T03:00:00Z",
        "note": "Invented. Cold air under a fresh southerly; ridge-level wind above 20 kt.",
        "wind": [(0, 190, 14), (1500, 185, 22), (4000, 195, 30), (8000, 215, 35),
                 (14000, 240, 45)],
    },
    "easterly-shear": {
        "name": "Easterly over a sea breeze",
        "valid": "2026-04-23T02:30:00Z",
        "note": "Invented. The wind turns through more than 150 degrees below 4000 ft.",
        "wind": [(0, 265, 9), (1200, 250, 4), (2500, 120, 6), (4000, 95, 16), (9000, 80, 26)],
    },
}  # fmt: skip

START = {
    "east": 28.9, "north": 37.9, "altitude_ft": 5850, "track_deg": 275, "aircraft": "vessim-two",
    "wind": "light-easterly",
    "note": "Flying down Ridge Valley towards the sea. Harvane Ridge hides Tarvane Aerodrome; "
    "ground on its far side is reached only round its western end.",
}  # fmt: skip
