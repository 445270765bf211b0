"""Cells of switching transistors: what their layers and dimensions make of Cgd and Cds.

Quasi-two-dimensional: each cell is cut into parts with a doping profile and an oxide of their own, whose
area shrinks as their neighbours deplete. SI throughout. Sources as in ``cell_physics.py``; the geometry is
our own and much simplified.
"""

from __future__ import annotations

import numpy as np
from cell_physics import OXIDE, SILICON, Q, bulk_mobility, depletion_width, depth_grid, surface_capacitance
from scipy.special import ndtr

UM = 1e-6
MM2 = 1e-6


def voltage_grid(v_max):
    """Voltages [V] to work a cell out at: fine around flat band, then ever coarser up to 1.3 v_max."""
    below = -np.geomspace(30.0, 1.0, 40)
    near = np.linspace(-1.0, 1.0, 201)[1:-1]
    return np.concatenate([below, near, np.geomspace(1.0, 1.3 * v_max, 700)])


def epitaxy(depth, surface, thickness, buffer):
    """Doping [m^-3]: `surface` up to `thickness` [m], then rising by e each `buffer` [m]."""
    rise = np.exp(np.minimum(np.maximum(depth - thickness, 0.0) / buffer, 40.0))
    return np.minimum(surface * rise, 1e25)


def still_open(width, half, relative):
    """Share of the cells that a depletion `width` [m] has not yet used up.

    No dimension is the same all over a wafer: their half width is normal about `half` [m] with a `relative`
    standard deviation.
    """
    return ndtr((1.0 - width / half) / relative)


def depleted(c, t_oxide, material):
    """Depletion width [m] behind an oxide, from both's capacitance per area [F/m^2]; 1 m if that is zero."""
    return np.where(c > 0.0, material.permittivity * (1.0 / np.maximum(c, 1e-12) - t_oxide / OXIDE), 1.0)


def layer_resistance(length, area, doping, hole=False):
    """Resistance [ohm] of a silicon layer: length/(q N mu A); holes at a third of the electrons' mobility."""
    return length / (Q * doping * bulk_mobility(doping) * (0.34 if hole else 1.0) * area)


def shielded_trench(v, *, area, pitch, mesa, depth, doping, oxide, overlap, t_gate, bottom, pads, v_flat=0.2):
    """Cgd and Cds [F] of gate-over-shield trenches.

    The mesa is cut into slices over its depth: doping rises downwards and the shield's oxide is thicker
    there, so each slice is used up (depleted from both walls) at its own voltage, and mesas differ in
    width. Below the trenches the epitaxy goes on depleting towards the substrate. The gate meets the drain
    at the overlap, and, once the mesa is used up, only through the slot between the shields, which screens
    it exponentially with depth.

    Parameters
    ----------
    v : ndarray
        [V].
    area, pitch, mesa, depth : float
        Active area [m^2], cell pitch, silicon between trenches, trench depth below the body [m].
    doping, oxide : (float, float)
        At the top and the bottom of the mesa [m^-3], [m].
    overlap, t_gate : float
        Gate's overlap over the drain, gate oxide [m].
    bottom : (float, float, float)
        Epitaxy below the trenches: doping [m^-3], thickness, tail to the substrate [m].
    pads : float
        Area of gate runners and pads over drain [m^2], behind half a micrometre of oxide.
    """
    eps, wall = SILICON.permittivity, 2.0 * area / pitch
    below = depth_grid(8.0 * UM)
    n_below = epitaxy(below, *bottom)
    w_below = depletion_width(v, below, n_below, SILICON)
    c_wall, open_mesa = np.zeros_like(v), np.zeros_like(v)
    x = depth_grid(0.8 * mesa)
    for y in (np.arange(24) + 0.5) / 24:
        t_oxide = oxide[0] + (oxide[1] - oxide[0]) * y
        c = surface_capacitance(v, x, np.full_like(x, doping[0] + (doping[1] - doping[0]) * y), SILICON, t_oxide)
        left = still_open(depleted(c, t_oxide, SILICON), 0.5 * mesa, 0.09)
        c_wall += wall * depth / 24 * c * left
        open_mesa += left / 24
    c = surface_capacitance(v, x, np.full_like(x, doping[0]), SILICON, t_gate, v_flat)
    c_overlap = wall * overlap * c * still_open(depleted(c, t_gate, SILICON), 0.5 * mesa, 0.09)
    # Body junction at the mesa's top, where the doping falls, as far as the mesa is not used up
    top = depth_grid(depth)
    n_top = doping[0] * (1.0 - np.exp(-top / (0.15 * UM))) + 1e18
    w_body = depletion_width(np.maximum(v, 0.0), top, n_top, SILICON, v_built=0.75)
    c_body = area * mesa / pitch * open_mesa * eps / w_body
    # Trench bottoms, and used-up mesas through them, over the epitaxy
    c_bottom = area / (oxide[1] * 1.5 / OXIDE + np.maximum(w_below, 20e-9) / eps) * (1.0 - mesa / pitch * open_mesa)
    screen = (mesa + 2.0 * oxide[0] * eps / OXIDE) / np.pi
    depth_used = depth * (1.0 - open_mesa) + w_below
    c_slot = wall * 0.25 * mesa * eps / (depth_used + 0.2 * UM) * np.exp(-depth_used / screen)
    c_pads = pads / (0.5 * UM / OXIDE + np.maximum(w_below, 20e-9) / eps)
    c_gd = c_overlap * open_mesa**1.5 + c_slot + c_pads
    return c_gd, c_wall + c_body + c_bottom


def planar_neck(v, *, material, area, pitch, half, n_neck, body_depth, drift, t_gate, v_built, pads, v_flat=0.2):
    """Cgd and Cds [F] of a planar cell: the gate over a neck that the bodies close as they deplete it.

    Parameters
    ----------
    v : ndarray
        [V].
    area, pitch, half, body_depth : float
        Active area [m^2], cell pitch, half the neck's width, depth of the bodies [m].
    n_neck : float
        Doping of the neck [m^-3].
    drift : (float, float, float)
        Below the bodies: doping [m^-3], thickness, tail to the substrate [m].
    pads : float
        Gate runners and pads over drain [m^2], behind a micrometre of oxide.
    """
    eps, over_neck = material.permittivity, area * 2.0 * half / pitch
    x = depth_grid(drift[1] + 40.0 * drift[2])
    n_below = epitaxy(x, *drift)
    w_below = depletion_width(np.maximum(v, 0.0), x, n_below, material, v_built)
    n_gate = np.where(x < body_depth, n_neck, n_below)
    side = depth_grid(3.0 * half)
    w_side = depletion_width(np.maximum(v, 0.0), side, np.full_like(side, n_neck), material, v_built)
    # Mean of what is open of a neck, 1 - w/a, over cells of differing widths
    t = (1.0 - w_side / half) / 0.08
    open_neck = 0.08 * (t * ndtr(t) + np.exp(-0.5 * t**2) / np.sqrt(2.0 * np.pi))
    c_open = over_neck * open_neck * surface_capacitance(v, x, n_gate, material, t_gate, v_flat)
    # Closed: the bodies screen the gate from the drain by the depth of the neck
    screen = np.exp(-0.5 * np.pi * body_depth / half)
    under_gate = 1.0 / (t_gate / OXIDE + (body_depth + w_below) / eps)
    c_closed = over_neck * (1.0 - open_neck) * screen * under_gate
    c_pads = pads / (UM / OXIDE + w_below / eps)
    flat = area - over_neck * open_neck
    walls = 2.0 * area / pitch * body_depth * open_neck
    return c_open + c_closed + c_pads, flat * eps / w_below + walls * eps / w_side


def superjunction(v, *, area, pitch, depth, doping, buffer, neck, t_gate, finger, pads, v_flat=0.25):
    """Cgd and Cds [F] of a superjunction: columns that deplete each other sideways, then one thick layer.

    Columns are cut into slices over their depth, each with its doping, each used up at its own voltage;
    cells differ in width. The gate lies over the top of the n-columns; when these are used up, the
    p-columns' tops, still full of holes, screen it, the less the more the growing field shortens them: the
    slight rise of Crss at high voltage.

    Parameters
    ----------
    v : ndarray
        [V].
    area, pitch, depth : float
        Active area [m^2], pitch of the columns, their depth [m].
    doping : ndarray
        Of the slices from top to bottom [m^-3], the same in both columns (charge balance).
    buffer : float
        Doping below the columns [m^-3].
    neck : (float, float)
        Half the width under the gate [m], its doping [m^-3].
    finger : (float, float)
        Length of the p-columns' tops that stay full of holes at low voltage [m], their doping [m^-3].
    pads : float
        Gate runners and pads over drain [m^2], behind a micrometre of oxide.
    """
    eps, walls = SILICON.permittivity, 2.0 * area * depth / pitch
    half, share = 0.25 * pitch, 1.0 / doping.size
    x = depth_grid(pitch)
    c_walls, left = np.zeros_like(v), np.zeros_like(v)
    for n in doping:
        # Both columns deplete alike, so each takes half of the voltage
        w = depletion_width(np.maximum(v, 0.0) / 2.0, x, np.full_like(x, n), SILICON, 0.36)
        still = still_open(w, half, 0.07)
        c_walls += share * walls * eps / (2.0 * w) * still
        left += share * still
    # One thick layer: columns used up, and the buffer below, whose doping carries the field through both
    field = Q * buffer / eps
    w_buffer = -depth + np.sqrt(depth**2 + 2.0 * np.maximum(v, 0.0) / field)
    c_thick = area * (1.0 - left) * eps / (depth * (1.0 - left) + w_buffer + 0.5 * UM)
    over_neck = area * 2.0 * neck[0] / pitch
    top = np.full_like(x, neck[1])
    w_top = depletion_width(np.maximum(v, 0.0), x, top, SILICON, 0.75)
    t = (1.0 - w_top / neck[0]) / 0.1
    open_top = 0.1 * (t * ndtr(t) + np.exp(-0.5 * t**2) / np.sqrt(2.0 * np.pi))
    shorter = np.maximum(finger[0] - eps * np.maximum(v, 0.0) / depth / (Q * finger[1]), 0.0)
    screen = np.exp(-0.5 * np.pi * shorter / neck[0])
    spread_out = left + (1.0 - left) * screen
    reach = neck[0] + depth * (1.0 - left) + w_buffer
    c_gd = over_neck * open_top * surface_capacitance(v, x, top, SILICON, t_gate, v_flat)
    c_gd = c_gd + over_neck * (1.0 - open_top) * spread_out / (t_gate / OXIDE + reach / eps)
    return c_gd + pads / (UM / OXIDE + reach / eps), c_walls + c_thick


def trench(v, *, area, pitch, gate, overlap, t_gate, t_bottom, epi, n_body, pads, v_flat=0.2):
    """Cgd and Cds [F] of plain trench gates: walls and bottom of the trench reach into the epitaxy.

    Parameters
    ----------
    v : ndarray
        [V].
    area, pitch, gate, overlap : float
        Active area [m^2], pitch, width of the trench, depth by which it passes the body [m].
    t_gate, t_bottom : float
        Oxide on the walls and on the bottom [m].
    epi : (float, float, float)
        Doping [m^-3], thickness below the body, tail to the substrate [m].
    n_body : float
        Doping of the body [m^-3], which takes its share of the voltage.
    pads : float
        Gate runners and pads over drain [m^2], behind half a micrometre of oxide.
    """
    eps = SILICON.permittivity
    x = depth_grid(epi[1] + 12.0 * epi[2])
    n = epitaxy(x, *epi)
    w_epi = depletion_width(np.maximum(v, 0.0), x, n * (1.0 + n / n_body), SILICON, 0.75)
    w_body = w_epi * epi[0] / n_body
    c_ds = area * (1.0 - gate / pitch) * eps / (w_epi + w_body)
    c_wall = surface_capacitance(v, x, np.full_like(x, epi[0]), SILICON, t_gate, v_flat)
    c_bottom = surface_capacitance(v, x, epitaxy(x + overlap, *epi), SILICON, t_bottom, v_flat)
    # The body's depletion covers the walls from above
    c_gd = area / pitch * (2.0 * overlap * c_wall / (1.0 + 0.3 * w_epi / overlap) + gate * c_bottom)
    return c_gd + pads / (0.5 * UM / OXIDE + w_epi / eps), c_ds
