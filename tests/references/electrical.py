"""Reference values for distributed electrodes, low passes and stored charge, with their sources.

Group "E" of the project's checks: computed with mpmath, all printed digits good.
"""

# Annular electrode a < r < b fed at the outer rim, inner rim open: b/a, Omega = omega R c b^2 (R the sum of both sheets'
# resistances, c in F/m2); |v(a)/v(b)|, phase of it in rad, R Re Y, R Im Y. Carslaw & Jaeger 1959, sec. 7.6-7.7
# (diffusion with periodic boundary temperature); McLachlan 1955. Section numbers from memory.
RIM_FED_ANNULUS = (
    (2.5, 0.1, 0.9999449056, -0.01366930211, 0.002083554423, 0.2638727205),
    (2.5, 1.0, 0.9945337377, -0.1363270519, 0.2062247432, 2.618096056),
    (2.5, 5.0, 0.8847788105, -0.6432545347, 4.137275006, 11.11672399),
    (2.5, 20.0, 0.4114726515, -1.773128780, 17.46641971, 20.48772571),
    (2.5, 100.0, 0.04220855303, 2.106467570, 41.22604571, 44.51437552),
    (4.0, 1.0, 0.9899535423, -0.1901352898, 0.3018765932, 2.904096007),
    (4.0, 10.0, 0.5617923095, -1.453539796, 10.99816786, 15.21370147),
)

# Series resistance of the same at low frequency: b/a, R/R_square. Elementary (limit of the above).
SERIES_RESISTANCE = ((2.0, 0.0255204452661), (2.5, 0.0299220862916), (4.0, 0.0354641736706))

# Lumped low pass: R ohm, C F, f Hz, |H|, phase rad. Elementary.
LOW_PASS = ((1e5, 1e-9, 1000.0, 0.8467330160, -0.5609821161), (5e4, 2e-9, 5000.0, 0.3033144711, -1.262627256))

# Stored charge and energy: C F, V, Q C, E J. Elementary.
STORED = ((2e-9, 3000.0, 6.0e-6, 0.009), (10e-9, 5000.0, 5.0e-5, 0.125))
