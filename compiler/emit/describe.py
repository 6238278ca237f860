"""The comment above each kernel."""

from rootwright.emit.layout import shared
from rootwright.emit.text import paragraph

NEAR = {"near_g": "the residual", "near_slope": "its slope", "near_curvature": "its curvature", "near_third": "its third derivative"}
TRIED = {"g": "the residual as written", "tried_slope": "its slope", "tried_rounding": "bound of its rounding error",
         "tried_slope_rounding": "the same of the slope", "tried_curvature": "the curvature"}


def comments(closure):
    """{kernel: comment lines}."""
    model = closure.model
    x = model.unknown.name
    switches = "the root lies on a switch between pieces, up to the error bound and the rounding of what is compared"
    texts = {
        "bracket": f"The bracket of {x}, and bounds of the rounding errors of its ends.",
        "residual": f"The residual, zero at the root, and its slope: {model.equation}",
        "rounding": f"Bounds of the rounding errors of the residual and of its slope at {x} (running error analysis; "
                    f"{float(closure.precision.unit):.3g} is the unit roundoff 2^-{closure.precision.digits} and a margin), and the curvature, the second derivative of the residual.",
        "outside": "True where the parameters are outside what the closure is meant for.",
        "kink": f"True where {switches}.",
        "still": "What depends on the parameters alone, worked out once for a solve.",
        "curve": f"What a step takes: {_among(closure, 'curve', NEAR)}. Forms other than the spec's, whose last bits may "
                 "differ.",
        "trial": f"What the certificate of a root takes: {_among(closure, 'trial', TRIED)}."
                 + (" What the derivatives share with it is left in known." if shared(closure) else ""),
        "guess": f"The first guess of {x}.",
        "start": f"The starting guess of the spec for {x}.",
        "outputs": "The outputs at the root.",
        "jacobian": f"Derivatives of {', '.join(model.results)} with respect to {', '.join(p.name for p in model.parameters)}, "
                    f"by the implicit function theorem: d{x}/dP = -g_P/g_{x}.",
        "hessian": f"Second derivatives of {', '.join(model.results)}: d2{x}/dP/dQ = -(dg_P/dQ + d{x}/dP*dg_{x}/dQ)/g_{x}, "
                   f"where d/dQ is the total derivative with respect to a parameter as {x} follows.",
    }
    return {kernel: paragraph(texts[kernel], 104) for kernel in closure.kernels}


def _among(closure, kernel, words):
    return ", ".join(words[result] for result in closure.kernels.get(kernel, ()) if result in words)
