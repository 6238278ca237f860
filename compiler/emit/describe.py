"""The comment above each kernel."""

from rootwright.emit.text import paragraph


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
        "curve": "Residual, slope and curvature for a step; the last bits may differ from the form as written.",
        "trial": "Residual and slope, the bounds of their rounding errors, and the curvature, all at once.",
        "guess": f"The first guess of {x}.",
        "start": f"The starting guess of the spec for {x}.",
        "outputs": "The outputs at the root.",
        "jacobian": f"Derivatives of {', '.join(model.results)} with respect to {', '.join(p.name for p in model.parameters)}, "
                    f"by the implicit function theorem: d{x}/dP = -g_P/g_{x}.",
        "hessian": f"Second derivatives of {', '.join(model.results)}: d2{x}/dP/dQ = -(dg_P/dQ + d{x}/dP*dg_{x}/dQ)/g_{x}, "
                   f"where d/dQ is the total derivative with respect to a parameter as {x} follows.",
    }
    return {kernel: paragraph(texts[kernel], 104) for kernel in closure.kernels}
