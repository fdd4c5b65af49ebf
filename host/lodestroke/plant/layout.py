"""Places in the flat arrays of the plant: y (what is integrated), p (parameters), m (modes and tallies).

All SI; pressures are gauge. Flat float64 arrays keep a control tick's call short and let anyone
integrate the same right-hand side with another solver.
"""

from __future__ import annotations

# y: the state that rhs() differentiates
(
    I_A,
    I_B,  # coil currents, A
    TW_A,
    TB_A,
    TW_B,
    TB_B,  # winding and body temperatures, degC
    X,  # slug displacement towards the chamber, m
    Q,  # slug volume flow into the chamber, m3/s
    P_CH,
    P_OUT,  # chamber and outlet pressure, Pa
    Q_IN,
    Q_OUT,  # flow through inlet and outlet valves when they conduct, m3/s
    V_IN,
    V_OUT,  # volume through each since the start, m3
    V_LOAD,  # volume through the restriction to the load, m3
    N_Y,
) = range(16)

# p: parameters
(
    AREA,
    SLUG_INERTANCE,
    SLUG_DRAG,
    X_MAX,
    STICK,
    M_S,
    CHI,
    FACE,  # saturation magnetisation A/m, initial susceptibility, half slug length m
    SPRING_V,
    AMBIENT_P,
    SPRING_N,
    C_CH,
    C_OUT,
    R_OUT,
    HEAD_IN,
    HEAD_OUT,
    CRACK_IN,
    CLOSE_IN,
    R_IN,
    L_IN,
    LEAK_IN,
    COLLAPSE_IN,
    REFORM_IN,
    CRACK_OUT,
    CLOSE_OUT,
    R_VO,
    L_VO,
    LEAK_OUT,
    COLLAPSE_OUT,
    REFORM_OUT,
    SUPPLY,
    R_SOURCE,
    DIODE,
    FULL_BRIDGE,
    COILS,
    R20_A,
    L_A,
    ALPHA_A,
    WB_A,
    CW_A,
    BA_A,
    CB_A,
    R20_B,
    L_B,
    ALPHA_B,
    WB_B,
    CW_B,
    BA_B,
    CB_B,
    AMBIENT_C,
    TICK_S,
    SUBSTEPS,
    DRIFT_CRACK,
    DRIFT_COLLAPSE,
    DRIFT_DRAG,
    DRIFT_M_S,  # relative, per stroke of coil a
    TABLE_FROM,
    TABLE_STEP,
    TABLE_N,
    N_P,
) = range(60)

# m: modes (closed, open, collapsed), timers and tallies
CLOSED, OPEN, COLLAPSED = 0.0, 1.0, 2.0
STICK_FLOW = 1e-8  # flow over which contact-line hysteresis changes sign, m3/s
(
    MODE_IN,
    MODE_OUT,
    SINCE_IN,
    SINCE_OUT,
    COLLAPSES_IN,
    COLLAPSES_OUT,
    MIN_MARGIN,
    PEAK_CH,
    PEAK_OUT,
    PEAK_C,
    LOW_CH,
    TIME,
    TICKS,
    STROKES,
    WAS_ON,
    N_M,
) = range(16)

# per sensor channel: low value, high value, counts at low, counts at high, full counts,
# noise, lag factor per substep, present, offset (value), gain error (relative), drift (value per tick)
(
    S_LOW,
    S_HIGH,
    S_CL,
    S_CH,
    S_FULL,
    S_NOISE,
    S_LAG,
    S_PRESENT,
    S_OFFSET,
    S_GAIN,
    S_DRIFT,
    N_S,
) = range(12)
