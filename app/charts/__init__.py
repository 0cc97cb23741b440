"""Core objects to charts, for screen and print; no Streamlit."""

from app.charts.balance import class_balance
from app.charts.estimates import estimates_with_intervals
from app.charts.in_and_out import in_and_out
from app.charts.per_class import per_class
from app.charts.print_form import svg
from app.charts.round_scores import round_scores
from app.charts.style import Figure

__all__ = [
    "Figure",
    "class_balance",
    "estimates_with_intervals",
    "in_and_out",
    "per_class",
    "round_scores",
    "svg",
]
