"""Strain energies of incompressible films and their derivatives; viscoelastic factors.

A and B are the squared principal stretches from the flat pre-stretched sheet, P = prestretch squared; the total
stretches are lam1^2 = P A, lam2^2 = P B, lam3^2 = 1/(P^2 A B). Everything is per unit volume of film.
"""

import numpy as np

from engine.laws import LAWS


def first_invariant(A, B, P):
    """I1 and its derivatives (A, B, AA, AB, BB)."""
    q = 1/(P**2*A*B)
    return P*(A + B) + q, P - q/A, P - q/B, 2*q/A**2, q/(A*B), 2*q/B**2


def second_invariant(A, B, P):
    """I2 and its derivatives (A, B, AA, AB, BB)."""
    return ((1/A + 1/B)/P + P**2*A*B, -1/(P*A**2) + P**2*B, -1/(P*B**2) + P**2*A,
            2/(P*A**3), P**2 + 0*A, 2/(P*B**3))


def _chain(invariant, f, f1, f2):
    """Derivatives of f(I(A, B)) from f, f', f'' and those of the invariant I."""
    _, IA, IB, IAA, IAB, IBB = invariant
    return f, f1*IA, f1*IB, f2*IA**2 + f1*IAA, f2*IA*IB + f1*IAB, f2*IB**2 + f1*IBB


def _neo_hookean(A, B, P, mu, parameters):
    I1, *derivatives = first_invariant(A, B, P)
    return mu/2*(I1 - 3), *(mu/2*part for part in derivatives)


def _mooney_rivlin(A, B, P, mu, parameters):
    C1 = mu/2/(1 + parameters[0])
    C2 = C1*parameters[0]
    I1, I2 = first_invariant(A, B, P), second_invariant(A, B, P)
    first, second = _chain(I1, C1*(I1[0] - 3), C1, 0.0), _chain(I2, C2*(I2[0] - 3), C2, 0.0)
    return tuple(a + b for a, b in zip(first, second, strict=True))


def _gent(A, B, P, mu, parameters):
    """Infinite where the stretch reaches the limit."""
    J_m = parameters[0]
    I1 = first_invariant(A, B, P)
    room = J_m - (I1[0] - 3)
    inside = np.where(room > 0, room, np.inf)       # the slope is then 0 and the energy below says infinite
    energy = np.where(room > 0, -mu*J_m/2*np.log(np.where(room > 0, room, J_m)/J_m), np.inf)
    return _chain(I1, energy, mu*J_m/2/inside, mu*J_m/2/inside**2)


def _yeoh(A, B, P, mu, parameters):
    C10 = mu/2
    C20, C30 = C10*parameters[0], C10*parameters[1]
    I1 = first_invariant(A, B, P)
    e = I1[0] - 3
    return _chain(I1, C10*e + C20*e**2 + C30*e**3, C10 + 2*C20*e + 3*C30*e**2, 2*C20 + 6*C30*e)


def _ogden(A, B, P, mu, parameters):
    m, alpha = (np.asarray(parameters[k::2]).reshape(-1, *(1,)*np.ndim(A)) for k in (0, 1))
    m = m*2*mu/np.sum(m*alpha)                      # small-strain modulus: half the sum of m alpha
    s = alpha/2
    a, b, c = (P*A)**s, (P*B)**s, (P**2*A*B)**-s
    k = m/alpha
    return tuple(np.sum(k*term, axis=0) for term in (
        a + b + c - 3, s*(a - c)/A, s*(b - c)/B,
        (s*(s - 1)*a + s*(s + 1)*c)/A**2, s*s*c/(A*B), (s*(s - 1)*b + s*(s + 1)*c)/B**2))


_ENERGIES = dict(zip(LAWS, (_neo_hookean, _mooney_rivlin, _gent, _yeoh, _ogden), strict=True))


def strain_energy(law, parameters, shear_modulus, prestretch, A, B):
    """W(A, B) in Pa and its derivatives (W_A, W_B, W_AA, W_AB, W_BB), each of the shape of A.

    Parameters are those of the design's film: none (neo-Hookean), C2/C1 (Mooney-Rivlin), J_m (Gent), C20/C10 and
    C30/C10 (Yeoh), pairs of modulus ratio and exponent (Ogden); all are scaled to the small-strain shear modulus.
    Beyond Gent's limiting stretch the energy is infinite.

    Source: Treloar 1975, ch. 4 and 10; Gent 1996; Yeoh 1993; Ogden 1972.
    """
    return _ENERGIES[law](A, B, prestretch**2, shear_modulus, parameters)


def _first_slopes(factor):
    """Slopes of a law of the first invariant from its factor f'(I1; mu, parameters)."""
    def slopes(A, B, P, mu, parameters):
        q = 1/(A*B*P**2)
        f = factor(P*(A + B) + q - 3, mu, parameters)
        return f*(P - q/A), f*(P - q/B)
    return slopes


def _mooney_slopes(A, B, P, mu, parameters):
    C1 = mu/2/(1 + parameters[0])
    C2 = C1*parameters[0]
    q = 1/(A*B*P**2)
    return (C1*(P - q/A) + C2*(B*P**2 - 1/(P*A**2)), C1*(P - q/B) + C2*(A*P**2 - 1/(P*B**2)))


def _ogden_slopes(A, B, P, mu, parameters):
    m, alpha = parameters[0::2], parameters[1::2]
    scale = 2*mu/sum(a*b for a, b in zip(m, alpha, strict=True))
    first, second = 0.0, 0.0
    for share, exponent in zip(m, alpha, strict=True):
        s = exponent/2
        c = (A*B*P**2)**-s
        first, second = first + share*scale/2*((P*A)**s - c), second + share*scale/2*((P*B)**s - c)
    return first/A, second/B


def _gent_factor(e, mu, parameters):
    room = parameters[0] - e
    return mu*parameters[0]/2/np.where(room > 0, room, np.inf)


_SLOPES = dict(zip(LAWS, (
    _first_slopes(lambda e, mu, parameters: mu/2), _mooney_slopes, _first_slopes(_gent_factor),
    _first_slopes(lambda e, mu, parameters: mu/2*(1 + 2*parameters[0]*e + 3*parameters[1]*e**2)), _ogden_slopes),
    strict=True))


def energy_slopes(law, parameters, shear_modulus, prestretch, A, B):
    """(W_A, W_B) of strain_energy alone, in the precision of A and B: for many states at once."""
    return _SLOPES[law](A, B, prestretch**2, shear_modulus, parameters)


def viscous_modulus(omega, shear_modulus, loss_factor, viscosity=0.0, relaxation=()):
    """S(omega) = i mu tan(delta) + i omega eta + sum g mu i omega tau/(1 + i omega tau), Pa, for omega > 0; 0 at rest.

    Parameters: omega (n_freq,) rad/s; relaxation is a tuple of (g, tau in s). The long-time modulus is shear_modulus.

    Source: Ferry 1980, ch. 1-3 (Kelvin-Voigt and generalised Maxwell); a constant loss factor is common practice.
    """
    omega = np.asarray(omega, float)
    S = 1j*(shear_modulus*loss_factor*(omega > 0) + omega*viscosity)
    for g, tau in relaxation:
        S = S + g*shear_modulus*1j*omega*tau/(1 + 1j*omega*tau)
    return S
