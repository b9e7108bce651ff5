"""Published and derived reference values of acoustics, with their sources.

A baffled circular source of radius a unless said otherwise; e^{+i omega t}; impedances over rho c pi a^2. The numbers
were computed from the closed forms or integrals named beside them with general-purpose libraries.
"""

# Baffled piston: (2 k a, R1, X1). R1 = 1 - 2 J1(x)/x, X1 = 2 H1(x)/x, x = 2 k a.
# Source: Rayleigh, Theory of Sound vol. 2, sec. 302; Kinsler & Frey 4th ed. sec. 7.5; Struve function: A&S 12.1.
PISTON = (
    (0.1, 0.001249479275, 0.04241303203),
    (0.5, 0.03092616930, 0.2086949770),
    (1, 0.1198988285, 0.3969146724),
    (2, 0.4232751922, 0.6467637283),
    (3, 0.7739606943, 0.6800730461),
    (4, 1.033021664, 0.5348633307),
    (5, 1.131031655, 0.3231247783),
    (8, 0.9413409133, 0.1220290115),
    (10, 0.9913054508, 0.1783664984),
    (16, 0.9887003530, 0.1021317640),
)

# Piston directivity 2 J1(s)/s, s = k a sin(theta): (s, amplitude). Half power, half amplitude, first null, first side
# lobe.
# Source: Kinsler & Frey 4th ed. sec. 7.4 (3.83; side lobe -17.6 dB).
PISTON_DIRECTIVITY = ((1.61633994831, 0.5**0.5), (2.21508936772, 0.5), (3.83170597021, 0.0),
                      (5.13562230184, -(10.0 ** (-17.57014993 / 20.0))))

# On-axis pressure of the piston: (k a, r/a, |p|/(rho c U)) = 2 |sin(k/2 (sqrt(r^2+a^2) - r))|.
# Source: Kinsler & Frey eq. (7.4.5), Pierce, Acoustics, sec. 5-7 [equation number from memory].
PISTON_ON_AXIS = (
    (5, 0.5, 1.999338963),
    (10, 1, 1.754904745),
    (20, 2, 1.407856208),
    (3, 10, 0.1494873243),
    (5, 100, 0.02499872404),
)

# Low-frequency radiation mass over rho a^3, referred to the mean velocity, of v = (n+1) (1-r^2/a^2)^n, n = 0, 1, 2.
# Source: Greenspan 1979 (J. Acoust. Soc. Am. 65:608); A&S 11.4.33.
GREENSPAN_MASS = (2.66666666667, 3.25079365079, 3.78274170274)

# Radiation impedance of the profiles (n+1) (1-r^2/a^2)^n referred to the mean velocity: n -> (k a, R, X).
# Source: King 1934 (Can. J. Res. 11:135); Greenspan 1979; Aarts & Janssen 2009 (J. Acoust. Soc. Am. 126:1776).
GREENSPAN_IMPEDANCE = {
    0: ((0.2, 0.0198671102, 0.16796270), (1, 0.423275192, 0.64676373), (3, 1.09222795, 0.15939175)),
    1: ((0.2, 0.0199113182, 0.20548487), (1, 0.447569113, 0.86450276), (3, 1.73375436, 0.51524757)),
    2: ((0.2, 0.0199334532, 0.23954958), (1, 0.460154879, 1.0543855), (3, 2.19202377, 1.0155943)),
}

# Their directivity D(s) = (n+1)! 2^(n+1) J_{n+1}(s)/s^(n+1): n -> (s, D).
# Source: Greenspan 1979; Sonine's first integral, DLMF 10.22.20.
GREENSPAN_DIRECTIVITY = {
    0: ((0.5, 0.9690738307), (1, 0.8801011715), (2, 0.5767248078), (4, -0.03302166401), (8, 0.05865908671)),
    1: ((0.5, 0.9793287507), (1, 0.9192278795), (2, 0.7056680572), (4, 0.1820640729), (8, -0.01412396505)),
    2: ((0.5, 0.9844723179), (1, 0.9390409912), (2, 0.7736594968), (4, 0.3226286054), (8, -0.02729364441)),
}

# Membrane modes J0(j_0m r/a), m = 1, 2. Source: derived (Lommel integral, DLMF 10.22.5; Rayleigh integral in
# wavenumber space); radiation efficiency as in ISO 7849 / Fahy & Gardonio 2007 ch. 3.
# Directivity: m -> (s, D), the last at s = j_0m.
MEMBRANE_DIRECTIVITY = {
    1: ((0.5, 0.9808716808), (1, 0.9251742571), (2, 0.7261172071), (4, 0.2248050319),
        (8, -0.01705157788), (2.404825557695773, 0.6242295848)),
    2: ((0.5, 0.9462331313), (1, 0.7911618844), (2, 0.2577223020), (4, -0.8362543473),
        (8, -0.1559980226), (5.520078110286311, -0.9391441552)),
}
# Impedance referred to the mean velocity and radiation efficiency: m -> (k a, R, X, efficiency).
MEMBRANE_IMPEDANCE = {
    1: (
        (0.2, 0.0199179556, 0.21442949, 0.0137764587),
        (1, 0.451323564, 0.91481378, 0.312162581),
        (3, 1.86377281, 0.63900212, 1.28909762),
    ),
    2: (
        (0.2, 0.0197694317, 0.39645298, 0.00259515756),
        (1, 0.371435902, 1.7712447, 0.0487588466),
        (3, 0.669661623, 5.6564874, 0.0879073031),
    ),
}
# Low-frequency mass over rho a^3 referred to the mean velocity, m = 1, 2; and of m = 1 for unit centre velocity.
MEMBRANE_MASS = (3.39038584, 6.26164609)
MEMBRANE_MASS_UNIT_CENTRE = 0.632009328

# Disk r < a and ring a < r < b in a baffle, b/a = 2.5: k b -> (ring R and X over rho c S_ring; mutual R and X over
# rho c b^2; disk R and X over rho c b^2). Source: derived (King integral), sum rule exact.
RING = {
    0.2: (0.0166705575, 0.13877037, 0.00840751110, 0.063694447,
          0.001606780625, 0.03407512170),
    1: (0.345895735, 0.52200828, 0.188903328, 0.24540204,
          0.03915423964, 0.1635166974),
    3: (0.718230864, 0.25560950, 0.625604294, -0.25937440,
          0.2847601290, 0.3449551760),
}

# Flat "cone" profile: rigid disk 1 for r < a, ln(b/r)/ln(b/a) for a < r < b, b/a = 2.5: k b -> (R and X referred to
# the volume velocity, directivity at 60 and at 90 degrees); volume velocity over pi a^2 is 2.864811253.
# Source: derived (Lommel integrals).
FLAT_CONE_VOLUME = 2.864811253
FLAT_CONE = {
    0.2: (0.0199228264, 0.2217059, 0.997826852, 0.997103291),
    1: (0.454085048, 0.9553947, 0.946769299, 0.929526381),
    3: (1.96137127, 0.7430547, 0.595122443, 0.492690317),
}

# Half-space monopole: (frequency, volume displacement m^3, distance, density, r.m.s. pressure Pa); |p| = rho omega^2
# V/(2 pi r).
# Source: Pierce, Acoustics, ch. 4; Kinsler & Frey sec. 7.1.
MONOPOLE = ((100.0, 1e-6, 1.0, 1.2, 0.05331459526), (1000.0, 5e-9, 0.5, 1.184, 0.05260373399))

# Air mass factor of a baffled disc, one side, incompressible: f/f_vac = 1/sqrt(1 + sides factor rho a/sigma).
# Source: Lamb 1920 (Proc. R. Soc. A 98:205), shape (1-r^2)^2; Kwak & Kim 1991 (J. Sound Vib. 146:381), exact clamped-
# plate mode [values from memory].
LAMB_FACTOR = 0.66894
KWAK_FACTOR = 0.65380
# The same for membrane modes J_n(j_nm r/a), m = 1 ... 4: n -> factors. Derived here.
MEMBRANE_FACTOR = {
    0: (0.74644, 0.26164, 0.15218, 0.10596),
    1: (0.33013, 0.17025, 0.11366, 0.08495),
    2: (0.22583, 0.13411, 0.09546, 0.07404),
    3: (0.17470, 0.11238, 0.08336, 0.06632),
    4: (0.14358, 0.09742, 0.07443, 0.06036),
}

# Moist air: (temperature C, pressure Pa, relative humidity, density, zero-frequency speed of sound), CO2 fraction
# 0.0004.
# Source: CIPM-2007 (Picard et al. 2008, Metrologia 45:149) and Cramer 1993 (J. Acoust. Soc. Am. 93:2510), restated in
# IEC 61094-2:2009 annex F; its table F.1 prints 1.1860848, 345.86652 and 0.9441589, 344.38267 for the first two
# [printed digits as quoted by a public test suite].
MOIST_AIR = (
    (23, 101325, 0.5, 1.186084789, 345.8665173),
    (20, 80000, 0.65, 0.9441589424, 344.3826652),
    (20, 101325, 0, 1.204557287, 343.3594669),
    (20, 101325, 0.5, 1.199314437, 343.9868873),
)
# The same at 0 C, dry, for a CO2 fraction of 0.000314 (Cramer's dry-air reference: about 331.45 m/s).
DRY_AIR_LESS_CO2 = (0.0, 101325.0, 0.0, 1.293002528, 331.4549987)

# Atmospheric absorption: (nominal frequency, base-10 exponent of the exact midband, temperature C, relative humidity,
# dB/km, the digits printed or None). Source: ISO 9613-1:1993 eqs (3)-(5), (B.2)-(B.3) and table 1; ISO 9613-2:1996
# table 2 [printed values from secondary sources].
ABSORPTION = (
    (1000.0, 3.0, 20.0, 0.7, 4.977810847, "4.98"),
    (1000.0, 3.0, 10.0, 0.7, 3.657685723, "3.66"),
    (50.0, 1.7, -20.0, 0.1, 0.5888335554, "0.589"),
    (125.0, 2.1, 20.0, 0.7, 0.3394724860, "0.3"),
    (500.0, 2.7, 20.0, 0.7, 2.797920359, "2.8"),
    (2000.0, 3.3, 20.0, 0.7, 9.016418940, "9.0"),
    (4000.0, 3.6, 20.0, 0.7, 22.91116734, "22.9"),
    (8000.0, 3.9, 20.0, 0.7, 76.62055160, "76.6"),
    (10000.0, 4.0, 20.0, 0.5, 158.8385573, None),
)
