"""A small wave-averaged large-eddy solver (Craik & Leibovich 1976; McWilliams, Sullivan & Moeng 1997).

It is a source of fields for tests, examples and plans, not a research code. What it solves, on a periodic box with
rigid lids (z up, surface z = 0; u is the Eulerian velocity, us(z, t) the Stokes drift, b = g alpha theta):

    du_i/dt + d_j((u_j + us_j) u_i) = -d_i p - eps_i3k f (u_k + us_k) - delta_i3 (u_j + us_j) d_z us_j + b delta_i3 - d_j tau_ij
    d_j u_j = 0,    dc/dt + d_j((u_j + us_j) c) = -d_j tau_cj        for temperature and one passive tracer

(the advective form of Suzuki & Fox-Kemper 2016, the same equations as the vortex-force form).

What a coarse grid misses, and this code with it: the upper two or three levels, where the subgrid share is large and the
Smagorinsky closure too dissipative (along-wind variance there comes out high, vertical variance low); the entrainment
zone, thinner than a few levels; wave breaking, bubbles, a depth-dependent sunlight; Stokes drift of short waves that
decay within two levels; cells wider than half the box. Published levels are met to some tens of percent, the orderings
of the variances are met.

Modules: grid (where values live), transforms (Fourier modes and back, 2/3 rule), forcing (wind, waves, heat; ramps),
subgrid (eddy viscosity), fluxes (advective + subgrid fluxes in physical space), tendency (the right-hand sides),
pressure (projection), stepper (third-order Runge-Kutta, stability limits), initial, run (a run from start to snapshots),
output (canonical dataset).
"""
