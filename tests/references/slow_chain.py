"""The whole chain from a design to the sound pressure, slowly and by other methods than the engine's.

Nothing of the engine is imported. Reference configuration: the film as bought, radius R in [A, B] = [a, b]/lam_p.
Rest state by shooting; motion on one polynomial basis over the whole meridian, all its matrices full and unreduced;
the air's load of every frequency by quadrature in wavenumber space. Circumferential order 0, neo-Hookean film, cone.
SI units, e^{+i omega t}, peak amplitudes, z towards the listener.

Sources: Adkins & Rivlin 1952 (Phil. Trans. A 244:505) for the membrane equations; Zhu, Cai & Suo 2010 (Polym. Int.
59:378) for the voltage's term in the energy; King 1934 (Can. J. Res. 11:135) for the wavenumber integral; ISO
9613-1:1993 eqs (3) to (5) for the absorption; second variation, loads and losses derived here.
"""

from dataclasses import dataclass
from math import asin, cos, exp, log, pi, sin, sqrt

import numpy as np
from numpy.polynomial import legendre
from scipy.integrate import solve_ivp
from scipy.optimize import root
from scipy.special import j0, j1

VACUUM_PERMITTIVITY = 8.8541878128e-12      # F/m, CODATA 2018


@dataclass(frozen=True)
class Plan:
    """What the chain needs of a loudspeaker, SI units; rear_volume None: open. held: the centre's height, if forced."""

    frame_radius: float
    centre_radius: float
    shear_modulus: float
    film_density: float
    thickness: float
    prestretch: float
    permittivity: float            # relative
    loss_factor: float
    electrode_thickness: float
    electrode_density: float
    centre_mass: float
    spring_rate: float
    spring_free_height: float
    spring_loss_factor: float
    rear_volume: float | None
    rear_loss_factor: float
    bias: float
    amplitude: float
    layers: int = 1
    held: float | None = None
    air_load: bool = True
    # 20 C, 101325 Pa, 50 %: CIPM-2007 (Picard et al. 2008), Cramer 1993, as restated in IEC 61094-2:2009 annex F
    air_density: float = 1.199314437
    sound_speed: float = 343.9868873


@dataclass(frozen=True)
class Rest:
    """Rest state on Gauss points (n,) of the reference radius R: weights dR, radius, height, stretches, slope angle."""

    R: np.ndarray
    weight: np.ndarray
    xi: np.ndarray                 # the points on [-1, 1]
    radius: np.ndarray
    height: np.ndarray
    lam1: np.ndarray
    lam2: np.ndarray
    theta: np.ndarray              # downward slope: dz = -lam1 sin(theta) dR
    centre_height: float
    force: float                   # N, the film's pull on the centre
    rim_lam1: float
    rim_theta: float


def field_number(plan):
    """e = eps V^2/(mu H^2)."""
    return plan.permittivity*VACUUM_PERMITTIVITY*plan.bias**2/(plan.shear_modulus*plan.thickness**2)


def stresses(lam1, lam2, e):
    """Nominal stresses over mu, dW/dlam1 and dW/dlam2, W = (lam1^2 + lam2^2 + (lam1 lam2)^-2)/2 - e (lam1 lam2)^2/2."""
    return (lam1 - lam1**-3*lam2**-2 - e*lam1*lam2**2, lam2 - lam2**-3*lam1**-2 - e*lam2*lam1**2)


def stiffnesses(lam1, lam2, e):
    """Second derivatives of W over mu: 11, 12, 22."""
    return (1 + 3*lam1**-4*lam2**-2 - e*lam2**2, 2*(lam1*lam2)**-3 - 2*e*lam1*lam2,
            1 + 3*lam2**-4*lam1**-2 - e*lam1**2)


def solve_rest(plan, n_points):
    """Rest state by shooting from the centre's rim: d(R s1)/dR = s2 cos(theta), R s1 sin(theta) = F/(2 pi)."""
    e, p = field_number(plan), plan.prestretch
    a, b = plan.centre_radius, plan.frame_radius
    A, B = a/p, b/p
    unit = plan.shear_modulus*plan.thickness*plan.layers

    def equations(R, y):
        r, _, lam1, theta = y
        lam2 = r/R
        s1, s2 = stresses(lam1, lam2, e)
        w11, w12, _ = stiffnesses(lam1, lam2, e)
        c, s = cos(theta), sin(theta)
        dlam2 = (lam1*c - lam2)/R
        return [lam1*c, -lam1*s, ((s2*c - s1)/R - w12*dlam2)/w11, -s2*s/(R*s1)]

    def shoot(unknown, where=None):
        lam1, theta, h = unknown[0], unknown[1], unknown[2]*a
        return solve_ivp(equations, (A, B), [a, h, lam1, theta], method="DOP853", rtol=1e-12, atol=1e-14*b,
                         max_step=(B - A)/24, t_eval=where)

    def pull(unknown):
        return 2*pi*A*unit*stresses(unknown[0], p, e)[0]*sin(unknown[1])

    def miss(unknown):
        end = shoot(unknown, [B]).y[:, -1]
        if plan.held is not None:
            balance = unknown[2] - plan.held/a
        else:
            balance = (plan.spring_rate*(plan.spring_free_height - unknown[2]*a) - pull(unknown))/(unit*a)
        return [end[0]/b - 1, end[1]/b, balance]

    tension = unit*(1 - p**-6 - e*p**2)
    flat = 2*pi*tension/log(b/a)
    h = plan.held if plan.held is not None else (plan.spring_rate*plan.spring_free_height/(plan.spring_rate + flat))
    slope = h/(a*log(b/a))
    found = root(miss, [p*sqrt(1 + 0.5*slope**2), asin(min(0.9, slope/sqrt(1 + slope**2))), h/a], tol=1e-13)
    if np.max(np.abs(found.fun)) > 1e-10:
        raise RuntimeError(f"shooting misses the frame by {found.fun}")
    xi, w = legendre.leggauss(n_points)
    R = (A + B)/2 + (B - A)/2*xi
    r, z, lam1, theta = shoot(found.x, np.append(R, B)).y
    return Rest(R, (B - A)/2*w, xi, r[:-1], z[:-1], lam1[:-1], r[:-1]/R, theta[:-1], found.x[2]*a,
                pull(found.x), lam1[-1], theta[-1])


@dataclass(frozen=True)
class Matrices:
    """Full matrices (n, n) of the motion q = [radial bubbles, centre's rise, axial bubbles] and the source's flow."""

    stiffness: np.ndarray          # spring included, rear not
    mass: np.ndarray
    dissipation: np.ndarray        # D0: q^T D0 q = int 2h (d1^2 + d2^2 + (d1+d2)^2) dA
    load: np.ndarray               # N/V
    flow: np.ndarray               # (n_points, n): nu dr/(2 pi) of the film at the Gauss points
    swept: np.ndarray              # m2, swept volume, the centre's in it
    centre: int                    # place of the centre's rise


def assemble(plan, rest, n_bubbles):
    """Second variation of the energy, kinetic energy, dissipation and electrode load on a polynomial basis.

    Radial displacement: n_bubbles integrals of Legendre polynomials, zero at both rims; axial: the same and the
    straight line from 1 at the centre to 0 at the frame.
    """
    half = (rest.R[-1] - rest.R[0])/(rest.xi[-1] - rest.xi[0])
    P = legendre.legvander(rest.xi, n_bubbles + 1)
    j = np.arange(1, n_bubbles + 1)
    bubble = (P[:, 2:] - P[:, :-2])/np.sqrt(2*(2*j + 1))
    slope = P[:, 1:-1]*np.sqrt((2*j + 1)/2)/half
    none = np.zeros_like(bubble)
    line, fall = (1 - rest.xi[:, None])/2, np.full((len(rest.xi), 1), -0.5/half)
    u, du = (np.hstack([X, 0*line, none]) for X in (bubble, slope))
    w, dw = np.hstack([none, line, bubble]), np.hstack([none, fall, slope])

    e, mu, c, s = field_number(plan), plan.shear_modulus, np.cos(rest.theta)[:, None], np.sin(rest.theta)[:, None]
    lam1, lam2 = rest.lam1, rest.lam2
    area = 2*pi*rest.R*rest.weight
    sheet = area*plan.layers*plan.thickness
    d1, d2, turn = c*du - s*dw, u/rest.R[:, None], s*du + c*dw      # delta lam1, delta lam2, lam1 times rotation
    s1, _ = stresses(lam1, lam2, e)
    w11, w12, w22 = stiffnesses(lam1, lam2, e)

    def form(weight, X, Y):
        return (X*weight[:, None]).T @ Y

    cross = form(mu*sheet*w12, d1, d2)
    K = (form(mu*sheet*w11, d1, d1) + cross + cross.T + form(mu*sheet*w22, d2, d2)
         + form(mu*sheet*s1/lam1, turn, turn))
    density = (plan.layers*plan.film_density*plan.thickness
               + (plan.layers + 1)*plan.electrode_density*plan.electrode_thickness*plan.prestretch**2)
    M = form(area*density, u, u) + form(area*density, w, w)
    n = n_bubbles
    K[n, n] += plan.spring_rate
    M[n, n] += plan.centre_mass
    g1, g2 = d1/lam1[:, None], d2/lam2[:, None]
    D0 = 2*(form(sheet, g1, g1) + form(sheet, g2, g2) + form(sheet, g1 + g2, g1 + g2))
    charge = 2*plan.permittivity*VACUUM_PERMITTIVITY*plan.bias/plan.thickness*plan.layers*area*lam1*lam2
    load = charge*lam2 @ d1 + charge*lam1 @ d2
    flow = (rest.radius*rest.weight*lam1)[:, None]*(c*w + s*u)
    swept = 2*pi*flow.sum(axis=0)
    swept[n] += pi*plan.centre_radius**2
    return Matrices(K, M, D0, load, flow, swept, n)


def gauss_panels(edges, n):
    """(points, weights) of an n-point Gauss rule on every panel between the edges."""
    x, w = legendre.leggauss(n)
    half, middle = np.diff(edges)/2, (edges[1:] + edges[:-1])/2
    return (middle[:, None] + half[:, None]*x).ravel(), (half[:, None]*w).ravel()


class King:
    """Radiation impedance of an axisymmetric source in a baffle by the wavenumber integral, frequency by frequency.

    Z_ij = rho c k 2 pi int V_i V_j kappa dkappa/sqrt(k^2 - kappa^2), V(kappa) = int v J0(kappa r) r dr.
    kappa = k sin(t) below k; kappa = sqrt(k^2 + w^2) above it, up to near/b; beyond, where the root is smooth, fixed
    Gauss panels up to far/b.

    Parameters: transform, function of kappa (m,) -> (m, n); edge, the source's radius b, m.
    """

    def __init__(self, transform, edge, near=30.0, far=600.0):
        self.transform, self.edge, self.split = transform, edge, near/edge
        n_panels = int(np.ceil((far - near)/pi))
        self.kappa, self.weight = gauss_panels(np.linspace(near, far, n_panels + 1)/edge, 8)
        self.tail = transform(self.kappa)

    def __call__(self, k):
        """Z (n, n) complex over rho c, m2."""
        if 1.5*k > self.split:
            raise ValueError("the near range must reach well beyond k")
        x, wx = gauss_panels(np.linspace(0, pi/2, 3), 16 + int(0.6*k*self.edge))
        inside = self.transform(k*np.sin(x))*np.sqrt(wx*k*np.sin(x))[:, None]
        top = sqrt(self.split**2 - k**2)
        y, wy = gauss_panels(np.linspace(0, top, int(np.ceil(top*self.edge/pi)) + 1), 12)
        near = self.transform(np.sqrt(k**2 + y**2))*np.sqrt(wy)[:, None]
        tail = self.tail*np.sqrt(self.weight*self.kappa/np.sqrt(self.kappa**2 - k**2))[:, None]
        return 2*pi*k*(inside.T @ inside + 1j*(near.T @ near + tail.T @ tail))


def disk_transform(kappa, radius):
    """Hankel transform of a disk moving with unit velocity, a J1(kappa a)/kappa; kappa > 0."""
    return radius*j1(kappa*radius)/kappa


def absorption(frequency, temperature=293.15, pressure=101325.0, humidity=0.5):
    """dB/m of a pure tone in moist air, ISO 9613-1 eqs (3) to (5), (B.1) to (B.3); humidity 0 ... 1."""
    pr, tr = pressure/101325.0, temperature/293.15
    h = 100*humidity*10**(-6.8346*(273.16/temperature)**1.261 + 4.6151)/pr
    frO = pr*(24 + 4.04e4*h*(0.02 + h)/(0.391 + h))
    frN = pr/sqrt(tr)*(9 + 280*h*exp(-4.170*(tr**(-1/3) - 1)))
    f2 = frequency**2
    return 8.686*f2*(1.84e-11*sqrt(tr)/pr + tr**-2.5*(0.01275*exp(-2239.1/temperature)/(frO + f2/frO)
                                                       + 0.1068*exp(-3352/temperature)/(frN + f2/frN)))


def propagator(radius, height, k, distance, angle, n_azimuth=96):
    """(n_points,) of e^{-ikd}/d, averaged around every ring (radius, height), d to the listener; the middle rule."""
    phi = (np.arange(n_azimuth) + 0.5)*pi/n_azimuth
    across, along = distance*sin(angle), distance*cos(angle)
    d = np.sqrt(np.square(along - height)[:, None] + np.square(radius)[:, None] + across**2
                - 2*across*radius[:, None]*np.cos(phi))
    return np.mean(np.exp(-1j*k*d)/d, axis=1)


class Chain:
    """A plan's rest state and matrices, and its pressure at any frequency."""

    def __init__(self, plan, n_bubbles=90, far=600.0):
        # the Gauss points must carry both the polynomials and J0(far r/b)
        self.plan = plan
        self.rest = solve_rest(plan, int(max(1.5*n_bubbles, 0.6*far)) + 40)
        self.matrices = assemble(plan, self.rest, n_bubbles)
        self.king = King(self.transform, plan.frame_radius, far=far) if plan.air_load else None

    def transform(self, kappa):
        """Hankel transforms (m, n) of the flow of every unknown."""
        V = j0(np.outer(kappa, self.rest.radius)) @ self.matrices.flow
        V[:, self.matrices.centre] += disk_transform(kappa, self.plan.centre_radius)
        return V

    def motion(self, frequency):
        """Amplitudes (n,) complex of all unknowns at one frequency, from the full system."""
        plan, m = self.plan, self.matrices
        omega, rho, c = 2*pi*frequency, plan.air_density, plan.sound_speed
        A = m.stiffness - omega**2*m.mass + 1j*plan.shear_modulus*plan.loss_factor*m.dissipation
        A[m.centre, m.centre] += 1j*plan.spring_loss_factor*plan.spring_rate
        if plan.rear_volume is not None:
            A += (1 + 1j*plan.rear_loss_factor)*rho*c**2/plan.rear_volume*np.outer(m.swept, m.swept)
        if self.king is not None:
            faces = 2 if plan.rear_volume is None else 1
            A += 1j*omega*faces*rho*c*self.king(omega/c)
        return np.linalg.solve(A, m.load*plan.amplitude)

    def pressures(self, frequency, listeners):
        """Complex peak pressure, Pa, at each (distance, angle) from the middle of the frame plane."""
        plan, q = self.plan, self.motion(frequency)
        omega = 2*pi*frequency
        k = omega/plan.sound_speed
        rc, wc = gauss_panels(np.array([0.0, plan.centre_radius]), 24)
        r = np.concatenate([rc, self.rest.radius])
        z = np.concatenate([np.full(len(rc), self.rest.centre_height), self.rest.height])
        flow = np.concatenate([rc*wc*q[self.matrices.centre], self.matrices.flow @ q])
        # p = i omega rho/(2 pi) int v e^{-ikd}/d dS, v dS = 2 pi i omega flow
        return np.array([-omega**2*plan.air_density*(propagator(r, z, k, distance, angle) @ flow)
                         * 10**(-absorption(frequency)*distance/20) for distance, angle in listeners])

    def levels(self, frequencies, listeners=((1.0, 0.0),)):
        """(n_listeners, n_freq) dB re 20 uPa of the r.m.s. pressure."""
        p = np.array([self.pressures(f, listeners) for f in frequencies]).T
        return 20*np.log10(np.abs(p)/sqrt(2)/20e-6)
