"""Reference values for stretched and deformed membranes, each with its source.

"derived": computed from the formula beside it with general-purpose libraries by two independent routes (shooting at
rtol 2.5e-14 and a spectral Ritz minimisation); all printed digits good.
"""

# Nominal stress, homogeneous deformation: law, constants (mu, law parameters), stretch, uniaxial, equibiaxial, pure shear
# s1, pure shear s2. Treloar 1975 ch. 4-5, 10; Mooney 1940; Gent 1996; Yeoh 1990/1993; Ogden 1972 (constants from memory).
NOMINAL_STRESS = (
    ("neo-hookean", 1.0, (), 1.5, 1.055555556, 1.368312757, 1.203703704, 0.5555555556),
    ("neo-hookean", 1.0, (), 2.0, 1.750000000, 1.968750000, 1.875000000, 0.7500000000),
    ("neo-hookean", 1.0, (), 4.0, 3.937500000, 3.999023438, 3.984375000, 0.9375000000),
    ("mooney-rivlin", 1.0, (0.25,), 1.5, 0.9851851852, 1.710390947, 1.203703704, 0.6944444444),
    ("mooney-rivlin", 1.0, (0.25,), 2.5, 2.059200000, 5.104008000, 2.436000000, 1.722000000),
    ("gent", 1.0, (97.2,), 2.0, 1.786764706, 2.076923077, 1.919431280, 0.7677725118),
    ("gent", 1.0, (97.2,), 5.0, 6.445347594, 9.680963855, 6.542912621, 1.258252427),
    ("gent", 1.0, (30.0,), 2.0, 1.875000000, 2.368421053, 2.027027027, 0.8108108108),
    ("gent", 1.0, (30.0,), 3.5, 5.082174463, 12.35590816, 5.302946081, 1.400778210),
    ("yeoh", 1.0, (-0.02, 0.0008), 2.0, 1.626800000, 1.691174707, 1.729031250, 0.6916125000),
    ("yeoh", 1.0, (-0.02, 0.0008), 4.0, 3.533512500, 7.433334924, 3.634185791, 0.8551025391),
    ("ogden", 4.225, (6.3, 1.3, 0.012, 5.0, -0.1, -2.0), 1.5, 4.016169789, 6.019802326, 4.815643585, 2.716456281),
    ("ogden", 4.225, (6.3, 1.3, 0.012, 5.0, -0.1, -2.0), 3.0, 8.799260976, 12.30704890, 9.524275443, 5.601582121),
)

# Generalised Maxwell model: E0, branches (E, tau), omega, E', E''. Ferry 1980; Tschoegl 1989.
MAXWELL = (1e5, ((5e4, 1e-4), (2e4, 1e-2)), 1000.0, 120297.0297, 6930.693069)

# Annular membrane, rim clamped at b = q a, rigid translating disk of mass M and spring K at a: q, M/(pi a^2 sigma),
# K/(2 pi T), k a of three modes. Derived; for no mass and no spring the cross product J1 Y0 - Y1 J0 of Abramowitz &
# Stegun 1964, Table 9.7; compare Rayleigh, Theory of Sound vol. 1 sec. 212.
DISK_ON_ANNULUS = (
    (2.5, 0.0, 0.0, (1.24266626447, 3.22655318204, 5.28885173140)),
    (2.5, 1.0, 0.0, (0.988179191658, 2.57436031227, 4.47264462832)),
    (2.5, 5.0, 0.0, (0.598302070881, 2.20147424746, 4.24124827145)),
    (2.5, 20.0, 0.0, (0.321995311400, 2.10619575953, 4.19338474893)),
    (2.5, 5.0, 2.0, (0.995474490748, 2.22483994147, 4.24418757178)),
    (2.5, 20.0, 10.0, (1.02163310097, 2.11559033587, 4.19435268267)),
    (4.0, 5.0, 0.0, (0.438310255982, 1.15959400199, 2.14668292675)),
    (4.0, 5.0, 1.0, (0.649774692727, 1.20383899073, 2.15277629896)),
)

# Clamped annulus, both rims held: q, k a of three modes, n = 0. Abramowitz & Stegun 1964, Table 9.7; DLMF 10.21(x).
HELD_ANNULUS = (
    (1.25, (12.5584703150, 25.1287696798, 37.6964614392)),
    (2.5, (2.07322884905, 4.17729882752, 6.27536998546)),
    (5.0, (0.763191266091, 1.55710634065, 2.34642071063)),
)

# The same with the disk closing a sealed volume, chi = pi a^4 gamma P0/(T V): q, M, K, chi, k a. Derived; without a disk
# the kettledrum of Kinsler & Frey, ch. 4.
DISK_ON_SEALED_VOLUME = (
    (2.5, 5.0, 0.0, 0.5, (0.942074004675, 2.55844087975, 4.24730255771)),
    (2.5, 5.0, 2.0, 0.2, (1.13626784118, 2.35518658234, 4.24642814846)),
    (4.0, 5.0, 1.0, 0.1, (0.886298629860, 1.51049668410, 2.16598653022)),
)

# Static limits of the annulus with its disk: q, F/(T h), volume of disk and annulus/(pi a^2 h). Elementary (log profile).
STATIC_ANNULUS = (
    (2.0, 9.064720284, 2.164042561),
    (2.5, 6.857196181, 2.864811253),
    (4.0, 4.532360142, 5.410106403),
)

# Cones: law, parameters, B/A, prestretch, h/A, e = eps phi^2/(mu H^2); F/(mu H A), meridional stretch at inner and outer
# rim, r/A and z/A at R = (A+B)/2, volume under membrane and disk/A^3, C/C0, least hoop stress/mu. Derived; the
# boundary-value problem of He, Zhao, Chen & Suo 2009, J. Appl. Phys. 106:083522 (citation from memory).
# Then omega^2 rho A^2/mu in vacuo at fixed voltage: disk held; disk M/(2 pi rho H A^2) = 2 free; the same with a spring
# K/(2 pi mu H) = 0.5.
CONES = (
    dict(law="neo-hookean", parameters=(), q=3.0, prestretch=1.2, h=0.3, e=0.0,
         force=1.161636989, lam_in=1.219752985, lam_out=1.205929473, r_mid=2.397930076, z_mid=0.1113939397,
         volume=4.951702120, capacitance=2.103057310, least=0.801954,
         held=(1.630232942, 5.253500632, 6.643906133), free=(0.2281233133, 1.985507706, 5.262565828),
         sprung=(0.3966252033, 2.032738461, 5.262938652)),
    dict(law="neo-hookean", parameters=(), q=3.0, prestretch=1.2, h=1.5, e=0.0,
         force=7.158764584, lam_in=1.687977243, lam_out=1.321388280, r_mid=2.381174500, z_mid=0.5835877161,
         volume=25.15687901, capacitance=2.804249179, least=0.868567,
         held=(2.065382507, 3.956819376, 8.203137785), free=(0.3263824991, 2.437167357, 4.143733497),
         sprung=(0.4925655945, 2.472913401, 4.156789255)),
    dict(law="neo-hookean", parameters=(), q=3.0, prestretch=1.2, h=1.5, e=0.1,
         force=5.922032239, lam_in=1.714280273, lam_out=1.313269734, r_mid=2.393944296, z_mid=0.5930676795,
         volume=25.57529613, capacitance=2.812057739, least=0.650428,
         held=(1.720957996, 3.547127007, 6.791372504), free=(0.2764929081, 2.061440117, 3.672628094),
         sprung=(0.4401886863, 2.101885714, 3.682353219)),
    dict(law="neo-hookean", parameters=(), q=2.5, prestretch=1.5, h=1.0, e=0.0,
         force=6.453614848, lam_in=1.824013498, lam_out=1.573079106, r_mid=2.619867792, z_mid=0.3932448775,
         volume=20.29434329, capacitance=5.995325606, least=1.38026,
         held=(4.088225591, 5.436644079, 16.47048001), free=(0.4172943371, 4.644860610, 5.560758260),
         sprung=(0.6071330541, 4.671061142, 5.569919840)),
    dict(law="neo-hookean", parameters=(), q=2.5, prestretch=1.5, h=1.0, e=0.2,
         force=3.323877153, lam_in=1.935909330, lam_out=1.533981898, r_mid=2.647316996, z_mid=0.3990630459,
         volume=20.75142655, capacitance=6.016172857, least=0.296617,
         held=(2.126726276, 3.205323552, 8.521553175), free=(0.2127269398, 2.478046304, 3.212967229),
         sprung=(0.3990259096, 2.514868836, 3.213890679)),
    dict(law="neo-hookean", parameters=(), q=4.0, prestretch=1.3, h=3.0, e=0.0,
         force=12.55161756, lam_in=2.389250430, lam_out=1.445448451, r_mid=3.224241943, z_mid=1.064137984,
         volume=87.68935358, capacitance=4.303155653, least=1.08215,
         held=(0.9967375075, 1.517546897, 4.023307559), free=(0.2216668383, 1.264679745, 1.632881161),
         sprung=(0.3519265635, 1.300762925, 1.665908874)),
    dict(law="neo-hookean", parameters=(), q=4.0, prestretch=1.3, h=3.0, e=0.1,
         force=10.18623119, lam_in=2.495850713, lam_out=1.420286663, r_mid=3.274867974, z_mid=1.079564547,
         volume=90.59686596, capacitance=4.357148300, least=0.417126,
         held=(0.8156086779, 1.273776638, 3.267480787), free=(0.1789184859, 1.077242198, 1.318320621),
         sprung=(0.3061418288, 1.126100090, 1.340133663)),
    dict(law="neo-hookean", parameters=(), q=2.0, prestretch=1.0, h=1.0, e=0.0,
         force=6.799129376, lam_in=1.608409177, lam_out=1.306117726, r_mid=1.496350127, z_mid=0.4472871825,
         volume=6.977785262, capacitance=1.964138459, least=0.413814,
         held=(7.647667745, 17.60909801, 29.61236642), free=(0.7571819935, 8.064997846, 18.45154274),
         sprung=(0.9666148307, 8.077514695, 18.46291597)),
    dict(law="gent", parameters=(20.0,), q=2.5, prestretch=1.5, h=1.0, e=0.1,
         force=5.702038438, lam_in=1.804772878, lam_out=1.575350343, r_mid=2.620368648, z_mid=0.3997060220,
         volume=20.46111629, capacitance=5.996182025, least=1.13507,
         held=(3.647531516, 6.383544093, 14.58361979), free=(0.3924976545, 4.174726178, 6.520351211),
         sprung=(0.5796040413, 4.205086221, 6.526540018)),
)

# Spring-biased cones: law, parameters, B/A, prestretch, K/(mu H), free height/A; then e: h/A, C/C0. Derived; set-up as in
# Carpi et al. 2008 and He et al. 2009.
SPRING_BIASED = (
    ("neo-hookean", (), 3.0, 1.2, 1.5, 4.0, ((0.0, 1.018065565, 2.410773762), (0.1, 1.156238259, 2.510605761),
                                             (0.2, 1.336306263, 2.666055816))),
    ("neo-hookean", (), 2.5, 1.5, 4.0, 2.5, ((0.0, 0.9576934570, 5.918155174), (0.1, 1.119029875, 6.240709287))),
    ("gent", (30.0,), 2.5, 1.3, 2.0, 3.0, ((0.0, 0.7500386665, 3.249538885), (0.15, 0.9320252998, 3.466827263))),
)

# Flat clamped equibiaxially stretched neo-Hookean film: prestretch, e, T/(mu H), e at loss of tension. Elementary:
# T = mu H (1 - l^-6 - e l^2), lost at e = l^-2 - l^-8.
FLAT_TENSION = (
    (1.2, 0.1, 0.5211020233, 0.4618764051),
    (1.5, 0.3, 0.2372085048, 0.4054260021),
    (2.0, 0.1, 0.5843750000, 0.2460937500),
)

# Pull-in of an ideal neo-Hookean dielectric under equibiaxial dead load: nominal stress/mu, critical stretch,
# phi_c/H sqrt(eps/mu). Zhao & Suo 2007, Appl. Phys. Lett. 91:061921; Koh et al. 2011, J. Polym. Sci. B 49:504.
DEAD_LOAD_PULL_IN = (
    (0.0, 1.25992104989, 0.687364818499),
    (0.5, 1.426700235, 0.5107394875),
    (1.0, 1.746300436, 0.3585747898),
    (2.0, 3.016028137, 0.1920621124),
)

# Voltage-stretch curve of a Gent film, equibiaxial, no load: J_m, stretch and phi/H sqrt(eps/mu) at the maximum, then at
# the minimum that follows. Zhao & Suo 2010, Phys. Rev. Lett. 104:178302.
GENT_SNAP = (
    (50.0, 1.267981003, 0.6914332180, 3.639074234, 0.3773178698),
    (100.0, 1.263804444, 0.6893632220, 5.074259959, 0.2746005535),
)
