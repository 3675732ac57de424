"""What the reviewer reads: figures, checks worked out from what flew, and the page that holds them."""

from pyharness.review.checks import Check, checks
from pyharness.review.faults import FaultsFlown
from pyharness.review.figures import save_figures
from pyharness.review.flown import Flown
from pyharness.review.page import ReviewData, render, review_data, write_page

__all__ = ["Check", "FaultsFlown", "Flown", "ReviewData", "checks", "render", "review_data", "save_figures", "write_page"]
