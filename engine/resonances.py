"""Where the film resonates with all of the air's load and losses, and the frequencies at which its response is asked."""

import numpy as np

from engine import material, radiation

GRID_POINTS = 280               # of the even log grid, before refinement at resonances
NEEDLE = 0.01                   # damping ratio below which a peak is drawn by ACROSS_NEEDLE
ACROSS_NEEDLE = np.array([-1.7, -0.65, 0.0, 0.65, 1.7])              # half-widths from the resonance
BROADEST = 0.06                 # damping ratio from which the even grid alone draws a peak
ACROSS_PEAK = np.array([-0.8, -0.4, -0.2, -0.1, 0.0, 0.1, 0.2, 0.4, 0.8])


def resonances(system, basis, reduced, which):
    """Complex frequency (n,) Hz of the modes `which` in air: the imaginary part over the real is the damping ratio.

    The root near omega_m of Z_mm - sum over n of Z_mn^2/Z_nn, Z the dynamic stiffness in the basis at omega_m: what is left
    for a mode when each other one follows it. With the mode that it is coupled to most, the two are solved together.

    Source: second-order perturbation of a complex symmetric eigenproblem, degenerate in pairs (elementary).
    """
    omega = 2*np.pi*basis.refined[which]
    x = np.minimum(omega*system.frame_radius/system.air.sound_speed, basis.tables.x_max)
    at = radiation.interpolation(x, basis.tables)
    own = np.arange(len(which)), which
    rows = [np.matmul(at[:, None], table[:, which].transpose(1, 0, 2))[:, 0] for table in basis.projected]
    diagonals = at @ np.einsum("pkii->pki", basis.projected)
    S = material.viscous_modulus(omega, *system.film_losses)[:, None]
    square, heavy = omega[:, None]**2, 2*np.pi*system.air.density*system.frame_radius**3*system.rear.faces*system.air_load
    K, D0, M = reduced.real

    def stiffness(part, resistance, reactance):
        return (part(K) + S*part(D0) + 1j*part(reduced.constant_loss) - square*part(M)
                + heavy*square*(1j*x[:, None]*resistance - reactance))

    row, diagonal = stiffness(lambda X: X[which], *rows), stiffness(np.diag, *diagonals)
    wet = np.diag(M) + heavy*diagonals[1]
    square_coupling = row**2
    square_coupling[own] = 0.0
    moved = square_coupling/diagonal
    partner = np.argmax(np.abs(moved), axis=1)
    there = np.arange(len(which)), partner
    # without its closest partner, then both exactly: (A - s w_m)(B - s w_n) = Z_mn^2, s = omega^2 - omega_m^2
    a = (row[own] - moved.sum(axis=1) + moved[there])/wet[own]
    b, c = diagonal[there]/wet[there], square_coupling[there]/(wet[own]*wet[there])
    swing = np.sqrt((a - b)**2/4 + c)
    lower, upper = np.sort_complex(np.stack([(a + b)/2 - swing, (a + b)/2 + swing], axis=1)).T
    alone = np.where(np.abs(lower - a) < np.abs(upper - a), lower, upper)
    of_partner = dict(zip(which.tolist(), partner.tolist(), strict=True))
    mutual = np.array([of_partner.get(n) == m for m, n in of_partner.items()], bool)
    shift = np.where(mutual, np.where(which < partner, lower, upper), alone)
    return np.sqrt(omega**2 + shift)/(2*np.pi)


def frequency_grid(system, basis, reduced, low, high, n_points=GRID_POINTS):
    """(n_freq,) Hz: an even log grid and, at every resonance narrower than it, points across the peak.

    In-plane modes as broad as the film's own loss make no peak in the sound and are left to the even grid.
    """
    even = np.geomspace(low, high, n_points)
    near = (basis.refined > 0.97*low) & (basis.refined < 1.03*high) & (basis.modes.damping_ratio < BROADEST)
    found = resonances(system, basis, reduced, np.flatnonzero(near))
    audible = np.array(basis.modes.kind)[near] != "in-plane"
    f, zeta = found.real, np.abs(found.imag)/np.maximum(found.real, 1e-300)
    needle, peak = zeta < NEEDLE, (zeta >= NEEDLE) & (zeta < BROADEST) & audible
    extra = np.concatenate([(f[some, None]*(1 + zeta[some, None]*offsets)).ravel()
                            for some, offsets in ((needle, ACROSS_NEEDLE), (peak, ACROSS_PEAK))])
    every = np.unique(np.concatenate([even, extra[(extra > low) & (extra < high)]]))
    keep = np.append(True, np.diff(np.log(every)) > 1e-6)
    keep[-1] = True
    return every[keep]
