"""Lines for the spec that would make a proof go through."""


def advise(proof, proved, witnesses):
    return ()
