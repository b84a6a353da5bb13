"""Terms of cover: what is paid of one event and of one year. No distributions in here."""

from lossagg.cover.clauses import Corridor, Surplus
from lossagg.cover.reinstatement import Reinstatements
from lossagg.cover.schedule import Schedule
from lossagg.cover.terms import Cover
from lossagg.cover.tower import Tower

__all__ = ["Corridor", "Cover", "Reinstatements", "Schedule", "Surplus", "Tower"]
