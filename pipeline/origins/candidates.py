"""The valid codes nearest to one that is not known."""

from __future__ import annotations

from collections.abc import Iterator, Set


def nearest_codes(code: str, valid: Set[str], *, most: int = 3) -> list[str]:
    """Valid codes one slip away: a character wrong, missing, too many, or two exchanged.

    That is Damerau's (1964) set of single errors, which he found to make up some 80 % of
    misspellings (figure from memory). Rather than measure the distance to every valid code, the
    slips of `code` are looked up, which takes the same short time however many codes there are.

    Parameters
    ----------
    code : a normalised code.
    valid : normalised codes.
    most : how many to return at most.

    Returns
    -------
    In the order of the slips: exchanged, wrong, missing or too many characters; then by code.
    """
    alphabet = sorted(_alphabet(code))
    found: list[str] = []
    for kind in (_exchanged(code), _wrong(code, alphabet), _shifted(code, alphabet)):
        hits = sorted({other for other in kind if other in valid and other not in found})
        found.extend(hits)
        if len(found) >= most:
            break
    return found[:most]


def _alphabet(code: str) -> Iterator[str]:
    """Characters that a slip may bring in: digits, and letters where the code has letters."""
    yield from "0123456789"
    if not code.isdigit():
        yield from "ABCDEFGHIJKLMNOPQRSTUVWXYZ"


def _exchanged(code: str) -> Iterator[str]:
    for i in range(len(code) - 1):
        yield code[:i] + code[i + 1] + code[i] + code[i + 2 :]


def _wrong(code: str, alphabet: list[str]) -> Iterator[str]:
    for i in range(len(code)):
        for character in alphabet:
            yield code[:i] + character + code[i + 1 :]


def _shifted(code: str, alphabet: list[str]) -> Iterator[str]:
    """One character taken out, or put in."""
    for i in range(len(code)):
        yield code[:i] + code[i + 1 :]
    for i in range(len(code) + 1):
        for character in alphabet:
            yield code[:i] + character + code[i:]
