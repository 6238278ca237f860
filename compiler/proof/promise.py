"""The promise that travels with a module: a certificate in a few plain lines, for the first comment of every file."""

import hashlib
import textwrap

from rootwright.calculus.closure import Promise
from rootwright.proof.certificate import parse

_WORDS = {
    "defined": "the bracket is in order and the residual is defined on it",
    "exists": "there is a root in the bracket",
    "unique": "it is the only one",
    "slope": "the slope at the root is not zero",
    "kink": "the root lies on no switch",
    "iterations": "the limit of evaluations suffices",
}


class Foreign(ValueError):
    """A certificate of another spec, or of another content of it."""


def promise(text, model):
    """The Promise of a certificate's text for a Model. Raises ValueError where it is no certificate, Foreign where it is another's."""
    certificate = parse(text)
    if certificate.digest != model.digest:
        raise Foreign("it was made for another content of the spec")
    proved = tuple(claim.name for claim in certificate.claims if claim.verdict == "proved")
    computed = tuple(claim.name for claim in certificate.claims if claim.verdict == claim.doubles == "proved")
    return Promise(tuple(_lines(certificate)), proved, computed, hashlib.sha256(text.encode("utf-8")).hexdigest())


def _lines(certificate, width=94):
    """What was proved over the operating range, and what was not."""
    lines = []
    for verdict, head in (("proved", "Proved over the whole operating range, for real numbers"), ("open", "Not proved"),
                          ("refuted", "REFUTED: this fails at points of the operating range")):
        claims = [claim for claim in certificate.claims if claim.verdict == verdict]
        if claims:
            lines += textwrap.wrap(f"{head}: " + "; ".join(_stated(claim) for claim in claims) + ".", width, subsequent_indent="    ")
    doubles = [_WORDS[claim.name] for claim in certificate.claims if claim.doubles == "proved"]
    if doubles:
        lines += textwrap.wrap("Proved for the doubles that this module computes, zero meaning zero up to rounding: "
                               + "; ".join(doubles) + ".", width, subsequent_indent="    ")
    return lines


def _stated(claim):
    text = _WORDS[claim.name]
    numbers = dict(claim.numbers)
    if claim.name == "slope" and "least_slope" in numbers and claim.verdict == "proved":
        text += f" (at least {numbers['least_slope']:.3g} in size)"
    if claim.verdict == "open" and 0.0 < claim.share < 1.0:
        text += f" (open on {100 * claim.share:.2g} % of the range)"
    return text
