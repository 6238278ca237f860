"""The certificate: what was proved of a spec, over which range, in plain data; its text, and back."""

import json
import tomllib
from dataclasses import asdict, dataclass

from rootwright.proof.witness import Witness

FORMAT = 1
CLAIMS = ("defined", "exists", "unique", "slope", "kink", "iterations")
MEANINGS = {
    "defined": "the bracket is in order and the residual has a value all over it",
    "exists": "a zero lies in the bracket, where the sign changes",
    "unique": "it is the only one",
    "slope": "the residual's slope at a zero is not 0",
    "kink": "no zero lies on a switch of where, min, max, abs or sign",
    "iterations": "the solver's limit of evaluations suffices",
}


@dataclass(frozen=True)
class Claim:
    """`verdict` holds over the real numbers, `doubles` for what the module computes ("" where it says nothing more)."""
    name: str
    verdict: str                                    # "proved" | "refuted" | "open"
    doubles: str                                    # "proved" | "open" | ""
    share: float                                    # of the operating range, left open
    reason: str
    witness: Witness | None
    worst: tuple[tuple[str, float, float], ...]     # the largest box left open: (parameter, low, high)
    numbers: tuple[tuple[str, float], ...]


@dataclass(frozen=True)
class Certificate:
    name: str
    digest: str                                     # SHA-256 of the spec's bytes
    ranges: tuple[tuple[str, str, str], ...]        # parameter, ends as written
    require: tuple[str, ...]
    relative: tuple[tuple[str, str], ...]           # variable of the proof that stands for a parameter, in words
    boxes: int
    claims: tuple[Claim, ...]
    advice: tuple[str, ...]                         # lines to paste into the spec that make the proof go through

    def claim(self, name):
        return next(claim for claim in self.claims if claim.name == name)

    @property
    def verdicts(self):
        return {claim.name: claim.verdict for claim in self.claims}


def render(certificate):
    """The certificate as lines for a reader."""
    lines = [f"{certificate.name}: {certificate.boxes:,} boxes"]
    for claim in certificate.claims:
        line = f"  {claim.name:<10} {claim.verdict:<8} {MEANINGS[claim.name]}"
        if claim.verdict == "open" and claim.share:
            line += f"; open on {_percent(claim.share)} of the range"
        lines.append(line)
        if claim.reason:
            lines.append(f"             {claim.reason}")
        if claim.witness:
            lines.append("             at " + ", ".join(f"{name} = {value}" for name, value in claim.witness.point))
            lines.append(f"             {claim.witness.reason}")
        if claim.worst:
            lines.append("             largest box left: " + ", ".join(f"{name} in [{low:.6g}, {high:.6g}]"
                                                                      for name, low, high in claim.worst))
        if claim.doubles:
            lines.append(f"             for the module's doubles: {claim.doubles}")
        lines += [f"             {name}: {value:.6g}" for name, value in claim.numbers]
    lines += [f"  {line}" for line in certificate.advice]
    return "\n".join(lines)


def _percent(share):
    return f"{100 * share:.3g} %"


def to_json(certificate):
    """Plain data for `--json`."""
    claims = {}
    for claim in certificate.claims:
        entry = {"verdict": claim.verdict, "share": claim.share, "meaning": MEANINGS[claim.name]}
        if claim.reason:
            entry["reason"] = claim.reason
        if claim.doubles:
            entry["doubles"] = claim.doubles
        if claim.witness:
            entry["witness"] = {name: text[1:-1].split(", ") if text.startswith("[") else text for name, text in claim.witness.point}
            entry["because"] = claim.witness.reason
        if claim.worst:
            entry["worst"] = {name: [low, high] for name, low, high in claim.worst}
        claims[claim.name] = entry | {name: value for name, value in claim.numbers}
    return {"name": certificate.name, "digest": certificate.digest, "boxes": certificate.boxes, "claims": claims,
            "advice": list(certificate.advice)}


def dump(certificate):
    """The certificate as text (TOML), the same bytes for the same certificate."""
    data = asdict(certificate)
    lines = [f"format = {FORMAT}"]
    lines += [f"{key} = {_toml(data[key])}" for key in ("name", "digest", "ranges", "require", "relative", "boxes", "advice")]
    for claim in data["claims"]:
        lines += ["", f"[{claim['name']}]"]
        lines += [f"{key} = {_toml(claim[key])}" for key in ("verdict", "doubles", "share", "reason", "worst", "numbers")]
        if claim["witness"]:
            lines += [f"witness = {_toml(claim['witness']['point'])}", f"because = {_toml(claim['witness']['reason'])}"]
    return "\n".join(lines) + "\n"


def parse(text):
    """Certificate of a text made by `dump`. Raises ValueError."""
    try:
        data = tomllib.loads(text)
        if data["format"] != FORMAT:
            raise ValueError(f"certificates of format {data['format']!r} are not known")
        claims = []
        for name in CLAIMS:
            part = data[name]
            witness = Witness(_pairs(part["witness"]), part["because"]) if "witness" in part else None
            claims.append(Claim(name, part["verdict"], part["doubles"], float(part["share"]), part["reason"], witness,
                                tuple((key, float(low), float(high)) for key, low, high in part["worst"]),
                                tuple((key, float(value)) for key, value in part["numbers"])))
        return Certificate(data["name"], data["digest"], tuple(map(tuple, data["ranges"])), tuple(data["require"]),
                           _pairs(data["relative"]), int(data["boxes"]), tuple(claims), tuple(data["advice"]))
    except (KeyError, TypeError, tomllib.TOMLDecodeError) as error:
        raise ValueError(f"not a certificate: {error}") from None


def _pairs(values):
    return tuple((name, value) for name, value in values)


def _toml(value):
    if isinstance(value, str):
        return json.dumps(value)
    if isinstance(value, float):
        text = repr(value)
        return text if "inf" in text or "nan" in text or "." in text or "e" in text else text + ".0"
    if isinstance(value, (tuple, list)):
        return "[" + ", ".join(map(_toml, value)) + "]"
    return str(value)
