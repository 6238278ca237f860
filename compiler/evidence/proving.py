"""`prove` for people: one spec or many, the table over many, and the witnesses as points that `eval` takes."""

import csv
from concurrent.futures import ProcessPoolExecutor

from rootwright.calculus.sampling import sample
from rootwright.proof.certificate import CLAIMS
from rootwright.proof.prove import BOXES, prove

SAMPLED = 100                       # solves that tell the most iterations seen
_SHORT = {"proved": "proved", "refuted": "REFUTED"}


def certify(closure, module, boxes=BOXES, seconds=None, workers=1, progress=None):
    """Certificate of a Closure; `module` is its loaded module, which tells the most iterations of a sample."""
    solved = [module.solve(list(point.values())) for point in sample(closure, SAMPLED)]
    seen = max((point.iterations for point in solved if point.status >= 0), default=None)
    return prove(closure, boxes=boxes, seconds=seconds, workers=workers, progress=progress, seen=seen)


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


def write_replay(stream, certificate):
    """The witnesses of a certificate as a CSV of points for `eval`: the parameters, then the claim and why it fails."""
    rows = [claim for claim in certificate.claims if claim.witness]
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow([*(name for name, *_ in certificate.ranges), "claim", "because"])
    for claim in rows:
        point = dict(claim.witness.point)
        writer.writerow([*(point[name] for name, *_ in certificate.ranges), claim.name, claim.witness.reason])
    return len(rows)
