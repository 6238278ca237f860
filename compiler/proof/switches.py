"""Refuting `kink`: a zero that certainly lies on a switch."""


def refute_kink(domain, examiner):
    return None
