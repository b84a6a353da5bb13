"""Identifiers that were damaged on the way: turned into numbers, shortened, or written in two alphabets."""

from __future__ import annotations

import unicodedata

import numpy as np

from lossagg.arrays import BoolArray
from lossagg.records.amounts import as_mask
from lossagg.records.faults import Fault
from lossagg.records.raw import Column, RawTable
from lossagg.records.typed import TypedColumns
from lossagg.records.words import WordArray

IDENTIFIERS = ("event", "claim")
FEW, MOST = 10, 0.9
_SCIENTIFIC = r"^\d(\.\d+)?[eE]\+?\d+$"
_ALPHABETS = ("LATIN", "CYRILLIC", "GREEK")


def identifier_faults(raw: RawTable, typed: TypedColumns, live: BoolArray) -> list[Fault]:
    """Find words that look damaged; all of these warn.

    Args:
        raw: the table as read.
        typed: its typed columns.
        live: True for rows that carry a record; shape (rows,).
    """
    faults = [_mixed_alphabets(name, words, live) for name, words in typed.words.items()]
    for name in IDENTIFIERS:
        if name in typed.words:
            faults += _damaged(name, raw.columns[name], typed.words[name], live)
    return faults


def _damaged(name: str, column: Column, words: WordArray, live: BoolArray) -> list[Fault]:
    import pyarrow.compute as pc

    digits = as_mask(pc.match_substring_regex(words.names, pattern=r"^\d+$"))
    length = pc.utf8_length(words.names).to_numpy(zero_copy_only=False)
    return [
        Fault(
            "identifier-form",
            "warn",
            name,
            _rows(words, as_mask(pc.match_substring_regex(words.names, pattern=_SCIENTIFIC))) & live,
            f"the {name} looks like an identifier that a spreadsheet turned into a number",
            "Export identifiers as text; different ones may have become the same.",
        ),
        Fault(
            "identifier-shortened",
            "warn",
            name,
            _rows(words, _shortened(digits, length)) & live,
            f"the {name} has fewer digits than nearly all others: leading zeros may be lost",
            "Export identifiers as text; 00123 and 123 would be told apart.",
        ),
        Fault(
            "identifier-number",
            "warn",
            name,
            _numbers_among_texts(column, words) & live,
            f"the {name} is a number where others of the column are text: leading zeros may be lost",
            "Format the column as text before the identifiers are entered or pasted.",
        ),
    ]


def _shortened(digits: BoolArray, length: np.ndarray) -> BoolArray:
    """True for numbers shorter than the one length that nearly all of them have."""
    short = np.zeros(len(digits), dtype=np.bool_)
    if np.count_nonzero(digits) < FEW:
        return short
    usual = int(np.bincount(length[digits]).argmax())
    if np.count_nonzero(length[digits] == usual) >= MOST * np.count_nonzero(digits):
        short = digits & (length < usual)
    return short


def _numbers_among_texts(column: Column, words: WordArray) -> BoolArray:
    written = words != ""
    if not column.is_text or not (written & ~column.native).any():
        return np.zeros(len(words), dtype=np.bool_)
    return written & column.native


def _mixed_alphabets(name: str, words: WordArray, live: BoolArray) -> Fault:
    """Words with letters of two alphabets: letters that look alike make two lines of one."""
    import pyarrow.compute as pc

    suspects = np.flatnonzero(~as_mask(pc.string_is_ascii(words.names)))
    mixed = np.zeros(len(words.names), dtype=np.bool_)
    for at in suspects.tolist():
        mixed[at] = len(_alphabets(words.names[at].as_py())) > 1
    return Fault(
        "mixed-alphabets",
        "warn",
        name,
        _rows(words, mixed) & live,
        f"the {name} has letters of two alphabets, some of which look alike",
        "Retype it; it is not the same as the word it looks like.",
    )


def _alphabets(word: str) -> set[str]:
    names = {unicodedata.name(letter, "").split(" ")[0] for letter in word if letter.isalpha()}
    return names & set(_ALPHABETS)


def _rows(words: WordArray, names: BoolArray) -> BoolArray:
    """The rows of some of the different words."""
    if not names.any():
        return np.zeros(len(words), dtype=np.bool_)
    rows: BoolArray = names[words.codes]
    return rows
