"""Pages made from data that was written before: nothing is measured or rendered here."""

from tackbench.report.figures import FIGURES, Figure
from tackbench.report.page import page

__all__ = ["FIGURES", "Figure", "page"]
