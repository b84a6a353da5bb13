"""Words that people use as headings, and which column each is likely to mean.

The first word of a list is the surest. Common practice of the trade, without a source; what is proposed from
them is always said, and is for the user to confirm.
"""

from __future__ import annotations

import re
from collections.abc import Mapping

from lossagg.records.headings import heading_key

WORDS: Mapping[str, str] = {
    "amount": (
        "amount, gross amount, gross loss, gross claim, loss amount, claim amount, gross incurred, incurred, "
        "total incurred, incurred amount, loss, gross, total loss, cost, claim cost, ultimate, total, "
        "betrag, schaden, schadenhöhe, schadenaufwand, montant, coût, importe, monto, importo, danno"
    ),
    "date": (
        "date, loss date, date of loss, accident date, date of accident, occurrence date, "
        "date of occurrence, event date, incident date, date of incident, date of event, "
        "date of casualty, accounting date, booking date, day, datum, "
        "schadendatum, schadentag, date de sinistre, date du sinistre, fecha, "
        "fecha de siniestro, data, data sinistro"
    ),
    "event": (
        "event, event id, event number, event no, event code, occurrence, occurrence id, occurrence number, "
        "root event, catastrophe, catastrophe code, cat code, casualty, ereignis, événement, evento"
    ),
    "claim": (
        "claim, claim number, claim no, claim id, claim reference, claim ref, reference, reference number, "
        "loss id, loss number, claim nr, schadennummer, schaden nr, schadennr, numéro de sinistre, "
        "no sinistre, siniestro, sinistro"
    ),
    "status": "status, claim status, state, open or closed, stand, statut, estado, stato",
    "paid": "paid, paid to date, total paid, paid amount, payments, bezahlt, payé, pagado, pagato",
    "outstanding": (
        "outstanding, case reserve, reserve, reserves, outstanding reserve, outstanding amount, "
        "case outstanding, rückstellung, réserve, reserva, riserva"
    ),
    "recoveries": (
        "recoveries, recovered, recovery, recovery amount, recoverable, amount recovered, regress, recours, "
        "recobros, recuperi"
    ),
    "reported": (
        "reported, report date, reported date, date reported, notified, date notified, notification date, "
        "date of notification, notice date, gemeldet, meldedatum, date de déclaration"
    ),
    "threshold": "threshold, reporting threshold, collection threshold, meldeschwelle, seuil, umbral, soglia",
    "policy-limit": "policy limit, sum insured, agreed value, limit of liability, limit, versicherungssumme",
    "deductible": "deductible, policy deductible, excess, selbstbehalt, franchise, franquicia, franchigia",
    "line": (
        "line, line of business, class of business, class, lob, cell, risk cell, business line, peril, "
        "cover type, claim type, loss type, sparte, branche, ramo"
    ),
    "currency": "currency, currency code, ccy, cur, währung, devise, moneda, valuta",
    "valuation": "valuation, valuation date, as at, as at date, as of, as of date, evaluation date, snapshot",
    "payment-date": "payment date, date paid, date of payment, paid date, settlement date",
    "closed-date": "closed date, closing date, date closed, date of closing",
}
_IN_BRACKETS = re.compile(r"[(\[][^)\]]*[)\]]")
_MARKS = re.compile(r"[.:#/*]+")


def heading_words(heading: str) -> str:
    """A heading as it is looked up: without case, brackets and marks; words joined by hyphens."""
    return heading_key(_MARKS.sub(" ", _IN_BRACKETS.sub(" ", heading))).strip("-")


def rank(heading: str, name: str) -> int | None:
    """How sure it is that a heading means a column: 0 is surest; None where it does not."""
    known = [heading_key(word) for word in WORDS[name].split(",")]
    known = [word.strip("-") for word in known]
    words = heading_words(heading)
    if words == name:
        return 0
    return known.index(words) if words in known else None
