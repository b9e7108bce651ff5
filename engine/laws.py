"""The film's strain-energy laws by name, and which parameters each takes beside the small-strain modulus."""

LAWS = ("neo-hookean", "mooney-rivlin", "gent", "yeoh", "ogden")
LAW_PARAMETER_NAMES = {"neo-hookean": (), "mooney-rivlin": ("C2/C1",), "gent": ("J_m",),
                       "yeoh": ("C20/C10", "C30/C10"), "ogden": ("μ1", "α1", "μ2", "α2", "…")}
TYPICAL_LAW_PARAMETERS = {"neo-hookean": (), "mooney-rivlin": (0.1,), "gent": (100.0,), "yeoh": (-0.01, 0.0002),
                          "ogden": (1.0, 1.8, 0.002, 6.0)}
LARGEST_PARAMETER = 1e6
LARGEST_OGDEN_EXPONENT = 20.0
MOST_OGDEN_TERMS = 6
LEAST_MOONEY_RATIO = -0.999
LEAST_GENT_LIMIT = 0.01


def parameter_fault(law, parameters, prestretch):
    """What is wrong with a law's parameters, and the remedy, in words that follow their name; "" if nothing is.

    The count must be the law's, the modulus at small strain positive, and a Gent film must reach its prestretch:
    I1(prestretch) - 3 < J_m with I1 = 2 lam^2 + lam^-4 (equibiaxial, incompressible).

    Parameters
    ----------
    law : str
        One of ``LAWS``.
    parameters : tuple of float
        Ratios, see ``LAW_PARAMETER_NAMES``; Ogden's mu_i are scaled elsewhere to give the film's small-strain modulus.
    prestretch : float
        Stretched over free length, equal in both directions.
    """
    names = LAW_PARAMETER_NAMES[law]
    is_pairs = len(parameters) % 2 == 0 and 2 <= len(parameters) <= 2 * MOST_OGDEN_TERMS
    if not (is_pairs if law == "ogden" else len(parameters) == len(names)):
        wanted = f"needs {', '.join(names)}" if names else "takes none"
        return (f"has {len(parameters)} numbers, but the law \"{law}\" {wanted}. "
                f"Start from {list(TYPICAL_LAW_PARAMETERS[law])}.")
    if not all(isinstance(value, float) and abs(value) <= LARGEST_PARAMETER for value in parameters):
        return f"must hold plain numbers from {-LARGEST_PARAMETER:g} to {LARGEST_PARAMETER:g}. Correct them."
    return {"gent": _gent_fault, "mooney-rivlin": _mooney_fault, "ogden": _ogden_fault}.get(law, _no_fault)(
        parameters, prestretch)


def _gent_fault(parameters, prestretch):
    """The prestretch must stay inside the limit of the chains."""
    reached = 2 * prestretch**2 + prestretch**-4 - 3
    if parameters[0] > max(reached, LEAST_GENT_LIMIT):
        return ""
    return (f"gives J_m = {parameters[0]:g}, but the prestretch of {prestretch:g} already reaches {reached:.4g}. "
            f"Raise J_m above {max(reached, LEAST_GENT_LIMIT):.4g} or lower the prestretch.")


def _mooney_fault(parameters, prestretch):
    """The small-strain modulus 2 (C1 + C2) must be positive."""
    if parameters[0] >= LEAST_MOONEY_RATIO:
        return ""
    return (f"gives C2/C1 = {parameters[0]:g}: no positive modulus at small strain. "
            f"Raise C2/C1 to at least {LEAST_MOONEY_RATIO}.")


def _ogden_fault(parameters, prestretch):
    """The small-strain modulus, half the sum of mu_i alpha_i, must be positive."""
    exponents = parameters[1::2]
    if not all(0.0 < abs(alpha) <= LARGEST_OGDEN_EXPONENT for alpha in exponents):
        return (f"holds an exponent α of 0 or beyond ±{LARGEST_OGDEN_EXPONENT:g}. "
                f"Choose exponents within ±{LARGEST_OGDEN_EXPONENT:g} other than 0.")
    terms = [mu * alpha for mu, alpha in zip(parameters[::2], exponents, strict=True)]
    if sum(terms) > 1e-6 * max(map(abs, terms)):
        return ""
    return (f"gives a sum of μ·α of {sum(terms):g}: no positive modulus at small strain. "
            "Change the terms so that the sum is positive.")


def _no_fault(parameters, prestretch):
    """Any parameters do: the modulus is the film's own (neo-Hookean, Yeoh)."""
    return ""
