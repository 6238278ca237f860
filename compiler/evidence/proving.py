"""`prove` for people: one spec or many, the table over many, and the witnesses as points that `eval` takes."""

import csv
from concurrent.futures import ProcessPoolExecutor
from dataclasses import replace

from rootwright.binding.build import BuildFailed, NoCompiler
from rootwright.binding.module import load
from rootwright.calculus.sampling import sample
from rootwright.emit.assemble import assemble
from rootwright.evidence.contradictions import contradictions
from rootwright.plan.choose import choose
from rootwright.plan.plan import PLAIN
from rootwright.proof.certificate import CLAIMS, dump
from rootwright.proof.promise import promise
from rootwright.proof.prove import BOXES, prove
from rootwright.proof.witness import middle

SAMPLED = 100                       # solves that tell the most iterations seen
_SHORT = {"proved": "proved", "refuted": "REFUTED"}


def certify(closure, boxes=BOXES, seconds=None, workers=1, progress=None):
    """(Certificate of a Closure, contradictions of the module that would be emitted with it).

    The most iterations of a sample are those of the safeguarded solver alone: a plan rests on the certificate.
    """
    plain = _built(closure, PLAIN)
    solved = [plain.solve(list(point.values())) for point in sample(closure, SAMPLED)]
    seen = max((point.iterations for point in solved if point.status >= 0), default=None)
    certificate = prove(closure, boxes=boxes, seconds=seconds, workers=workers, progress=progress, seen=seen)
    promised = replace(closure, promise=promise(dump(certificate), closure.model))
    return certificate, contradictions(closure, _built(promised, choose(promised)), certificate)


def _built(closure, plan):
    """The loaded module in C, or in Python where C cannot be built."""
    try:
        return load(closure, assemble(closure, "c", plan), "c")
    except (NoCompiler, BuildFailed):
        return load(closure, assemble(closure, "python", plan), "python")


def in_processes(work, jobs, workers):
    """Results of `work(job)` for every job, in order, on so many processes; one process is this one."""
    if workers == 1 or len(jobs) == 1:
        yield from map(work, jobs)
        return
    with ProcessPoolExecutor(workers) as pool:
        yield from pool.map(work, jobs)


def failed(certificate, strict):
    """A claim is refuted, or, strictly, not proved."""
    wanted = ("proved",) if strict else ("proved", "open")
    return any(verdict not in wanted for verdict in certificate.verdicts.values())


def table(certificates):
    """Lines of a table over several specs: a column for each claim, the share left open where it is open."""
    width = max(len(certificate.name) for certificate in certificates)
    lines = [" ".join([" " * width, *(f"{name:>11}" for name in CLAIMS), f"{'boxes':>9}"])]
    for certificate in certificates:
        cells = [_SHORT.get(claim.verdict) or (f"open {100 * claim.share:.2g} %" if claim.share < 1.0 else "open")
                 for claim in certificate.claims]
        lines.append(" ".join([f"{certificate.name:{width}}", *(f"{cell:>11}" for cell in cells), f"{certificate.boxes:>9,}"]))
    settled = sum("open" not in certificate.verdicts.values() for certificate in certificates)
    return [*lines, f"{settled} of {len(certificates)} specs fully settled"]


def told(found, most=5):
    """Lines that tell of contradictions."""
    lines = []
    for contradiction in found[:most]:
        lines += [f"  {contradiction.claim:<10} CONTRADICTED by the built module: {contradiction.reason}",
                  "             at " + ", ".join(f"{name} = {value!r}" for name, value in contradiction.point)]
    return [*lines, f"  and at {len(found) - most} points more"] if len(found) > most else lines


def write_replay(stream, certificate, found=()):
    """Every witness of a certificate, and every point at which the built module contradicts it, as a CSV of points for `eval`.

    The parameters, then the claim and why it fails. A witness in a box stands as the box's middle. Returns the number of points.
    """
    names = [name for name, *_ in certificate.ranges]
    rows = [([middle(dict(claim.witness.point)[name]) for name in names], claim.name, claim.witness.reason)
            for claim in certificate.claims if claim.witness]
    rows += [([repr(dict(contradiction.point)[name]) for name in names], contradiction.claim, contradiction.reason) for contradiction in found]
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow([*names, "claim", "because"])
    writer.writerows([*numbers, claim, because] for numbers, claim, because in rows)
    return len(rows)
