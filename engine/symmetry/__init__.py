"""Symmetry: operations, groups, and what they do to reflections.

group = space_group("P63/mmc")
check_metric(lattice, group)
full = expand(asymmetric, group).reflections
"""

from engine.symmetry.enumeration import unique_reflections
from engine.symmetry.expand import Expansion, expand, reduce
from engine.symmetry.group import Group
from engine.symmetry.metric import METRIC_TOLERANCE, check_metric
from engine.symmetry.operations import Operation, format_operation, parse_operation
from engine.symmetry.reflections import Classification, Orbits, classify, equivalents, orbits
from engine.symmetry.tables import plane_group, space_group, space_group_setting, stack_group

__all__ = [
    "METRIC_TOLERANCE",
    "Classification",
    "Expansion",
    "Group",
    "Operation",
    "Orbits",
    "check_metric",
    "classify",
    "equivalents",
    "expand",
    "format_operation",
    "orbits",
    "parse_operation",
    "plane_group",
    "reduce",
    "space_group",
    "space_group_setting",
    "stack_group",
    "unique_reflections",
]
