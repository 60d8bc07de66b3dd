"""Several forms of one protein: what stays together in all of them."""

from structmap.forms.changes import ContactChange, find_changes
from structmap.forms.comparing import (
    Comparison,
    FormPair,
    compare_folders,
    compare_forms,
)
from structmap.forms.errors import DifferentProteinError
from structmap.forms.mapping import (
    FormMap,
    Reference,
    map_form,
    reference_of,
    sites_in_form,
)
from structmap.forms.reading import Form, FormUnit, make_form, read_form, read_units
from structmap.forms.superposition import (
    RigidBody,
    find_rigid_bodies,
    superpose,
)
from structmap.forms.units import UnitInForm, judge_unit_in_form, verdict_over_forms

__all__ = [
    "Comparison",
    "ContactChange",
    "DifferentProteinError",
    "Form",
    "FormMap",
    "FormPair",
    "FormUnit",
    "Reference",
    "RigidBody",
    "UnitInForm",
    "compare_folders",
    "compare_forms",
    "find_changes",
    "find_rigid_bodies",
    "judge_unit_in_form",
    "make_form",
    "map_form",
    "read_form",
    "read_units",
    "reference_of",
    "sites_in_form",
    "superpose",
    "verdict_over_forms",
]
