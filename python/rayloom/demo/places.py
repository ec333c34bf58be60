"""The places of the Vessandra Highland that carry a seismic station.

The highland, its names and its heights are invented. A lake in the north-west
and a bay in the south-west leave gaps in the network; around the volcano
Ombrel the stations stand closer. Each place is the one farthest from those
before it, so that the first few make a smaller network of the same width.
"""

from __future__ import annotations

from dataclasses import dataclass

NETWORK = "XX"
"""Network code commonly written where no real network is meant."""


@dataclass(frozen=True)
class Place:
    """One station site.

    Parameters
    ----------
    code : str
        Station code.
    name : str
        Name of the place.
    east_km, north_km : float
        Position on the map, from the centre of the highland.
    elevation_m : float
        Height above sea level.
    """

    code: str
    name: str
    east_km: float
    north_km: float
    elevation_m: float


PLACES = (
    Place("OMBR", "Ombrel Summit", 28.0, -18.0, 2196),
    Place("TARH", "Tarhollin", -124.4, 119.4, 51),
    Place("KESV", "Kesvarra", 128.3, 135.3, 173),
    Place("DOLM", "Dolmirane", 2.4, -175.7, 320),
    Place("QUEN", "Quenstrath", 181.7, 4.6, 110),
    Place("ILVA", "Ilvashen", -12.8, 162.9, 69),
    Place("BRUH", "Bruhallow", 111.0, -126.8, 23),
    Place("SEND", "Sendrivar", -89.2, -25.0, 127),
    Place("PELG", "Pelgorran", -34.1, 58.5, 932),
    Place("WYNT", "Wyntassel", 86.4, 42.5, 1215),
    Place("HOLV", "Holvenmere", 102.8, -47.3, 679),
    Place("RASK", "Raskadoon", -132.1, 44.6, 240),
    Place("MIRT", "Mirtolay", -34.7, -73.8, 818),
    Place("FENV", "Fenvarrick", 55.1, 103.2, 1018),
    Place("JOSK", "Joskellan", 50.3, -99.4, 867),
    Place("LUMB", "Lumbarrow", -56.7, -135.0, 37),
    Place("CALV", "Calvedry", 181.5, 67.9, 67),
    Place("NESH", "Neshmora", 28.0, 48.0, 1175),
    Place("ORRY", "Orrymond", -50.6, 123.8, 265),
    Place("TUVL", "Tuvellin", 65.4, -155.1, 57),
    Place("GRIF", "Grisfallow", -24.7, -8.3, 956),
    Place("ESKO", "Eskorrel", 139.2, -82.7, 145),
    Place("VARM", "Varmisken", 117.5, 0.4, 764),
    Place("HAZL", "Hazlorn", -9.8, -116.0, 505),
    Place("DRUV", "Druvmesk", -88.7, 23.7, 579),
    Place("SIBL", "Siblorra", 165.3, -43.0, 206),
    Place("YARR", "Yarrowmane", -85.9, 96.4, 629),
    Place("ZELK", "Zelkarin", 84.3, 137.2, 414),
    Place("UMBL", "Umblestow", 59.4, -53.2, 1216),
    Place("PYRN", "Pyrnadale", 16.5, -72.0, 1174),
    Place("KOLM", "Kolmasset", 32.9, 140.6, 13),
    Place("ANTV", "Anthovar", 68.7, -5.2, 1321),
    Place("BEZR", "Bezenray", 150.9, 32.7, 380),
    Place("CROV", "Crovishaw", 103.4, 100.9, 1147),
    Place("DUNV", "Dunvessel", 27.9, -139.4, 493),
    Place("ELMU", "Elmorune", -87.6, 139.2, 249),
    Place("FARL", "Farlisk", -68.7, -94.6, 53),
    Place("GANT", "Gantomel", 11.0, 83.9, 984),
    Place("HURK", "Hurkavane", 153.9, 105.0, 350),
    Place("INGL", "Inglisort", -4.1, 32.0, 1194),
    Place("JASP", "Jasperlow", -63.5, -48.8, 230),
    Place("KYNM", "Kynesmark", 105.1, -92.6, 78),
    Place("LORQ", "Lorquillan", 149.2, -12.8, 525),
    Place("MEVA", "Mevadrin", 80.7, 75.4, 1280),
    Place("NORU", "Norudell", 118.0, 49.9, 893),
    Place("OSTV", "Ostvarran", -54.9, 33.9, 896),
    Place("PRAL", "Pralbeck", 74.3, -77.7, 411),
    Place("QUIL", "Quillodan", -18.5, -50.3, 1043),
    Place("RUSV", "Rushavar", -29.3, 20.6, 897),
    Place("STOV", "Stovenwick", 18.7, 17.3, 1452),
    Place("THAL", "Thalmeron", 90.1, 11.4, 1161),
    Place("URSK", "Urskellen", 21.4, -43.9, 1836),
    Place("VOLD", "Voldamir", -42.1, -33.9, 469),
    Place("WREH", "Wrenhagen", 51.4, 36.8, 1152),
    Place("XAND", "Xandolin", 87.5, -27.1, 1022),
    Place("YSTR", "Ystrallow", -0.9, -2.6, 1623),
    Place("ZORN", "Zornavale", -9.4, -28.5, 1366),
    Place("BALQ", "Balquenny", 60.0, -29.8, 1451),
    Place("CORV", "Cormavell", -47.8, -7.8, 707),
    Place("SKAR", "Skarrowen", 41.1, -1.2, 1951),
)
