"""Self-avoiding polygons: closed, no site twice."""

from fleetcount.series.objects.rule import CountedObject

RULE = CountedObject("polygon", 1, "self-avoiding polygons, up to lattice translation, per cell", closed=True)
