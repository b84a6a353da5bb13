"""Terms of cover: what is paid of one event and of one year. No distributions in here."""

from lossagg.cover.schedule import Schedule
from lossagg.cover.terms import Cover

__all__ = ["Cover", "Schedule"]
