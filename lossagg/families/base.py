"""What every law answers: the protocol of count laws and size laws.

A law is a frozen object. Its public methods take scalars or arrays and hand back the same kind; the
methods a law writes itself (`_sf`, `_isf`, ...) see float64 arrays only. Survival functions and
their inverses are primitives, never one minus something: a far tail of 1e-300 keeps its digits.
"""

from lossagg.families.count_law import ComplexArray, CountLaw
from lossagg.families.law import Law
from lossagg.families.size_law import SizeLaw

__all__ = ["ComplexArray", "CountLaw", "Law", "SizeLaw"]
