"""Known closed forms: recognised from a formula and the laws of its inputs, never approximated."""

from outspread.routes.closed_form.gaussian import NormalDependence
from outspread.routes.closed_form.named import ClosedForm
from outspread.routes.closed_form.recognition import recognise

__all__ = ["ClosedForm", "NormalDependence", "recognise"]
