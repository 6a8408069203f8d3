"""What determines an optimum: the limits at their bounds, the LEDs lit, the pairs that count."""

from __future__ import annotations

import numpy as np

from codesign.assemble import exposure_window
from codesign.limits import Setting, saturation_electrons
from codesign.program import Program
from codesign.solve_joint import Optimum, Rig

#: Charges below this share of what an LED could carry are dust.
DUST = 1e-9


def what_binds(optimum: Optimum) -> frozenset[str]:
    """What determines an optimum: limits at their bounds, LEDs lit, and among several pairs those that count."""
    state, rig = optimum.state, optimum.rig
    program, setting = state.programs[0], rig.setting
    rows, leds, n = program.rows.shape[1], program.heat_cap.size, program.segments
    active = state.active
    names = {name for name, at in zip(program.row_names, active[:rows], strict=True) if at}
    if any(name.startswith("well, ") for name in names):
        full = setting.gain.full_well_e <= saturation_electrons(setting.camera, setting.gain)
        names.add("saturation by full well" if full else "saturation by top grey value")
    names |= {f"junction, {rig.leds[led]}" for led in np.flatnonzero(active[rows : rows + leds])}
    full = np.flatnonzero(active[rows + leds : rows + leds + n])
    names |= {_end_of_drive(rig, program, setting, int(j)) for j in full} - {""}
    window = exposure_window(rig.problem, setting)
    if active[-2]:
        by_clock = program.time_high[0] >= window.high.time * (1 - 1e-12)
        names.add(window.high.name if by_clock else "ambient light in the wells")
    if active[-1]:
        names.add(window.low.name)
    charge = np.bincount(program.led, state.u[:-1], minlength=leds)
    names |= {f"LED {name} lit" for name, q in zip(rig.leds, charge, strict=True) if q > DUST}
    if len(rig.problem.pairs) > 1:
        surfaces = rig.problem.surfaces
        counted = [pair for pair, counts in zip(rig.problem.pairs, state.pairs, strict=True) if counts]
        names |= {f"pair {surfaces[i].id} on {surfaces[j].id}" for i, j in counted}
    return frozenset(names)


def _end_of_drive(rig: Rig, program: Program, setting: Setting, segment: int) -> str:
    """Limit at the upper end of a drive segment: none inside the droop curve."""
    led = int(program.led[segment])
    if segment + 1 < program.segments and program.led[segment + 1] == led:
        return ""
    share = rig.choice.share.get(rig.leds[led], 1.0)
    reached = float(program.width[program.led == led].sum()) / share * 1e3
    cut = reached < setting.level.current_ma[led] * (1 - 1e-9)
    return f"junction, {rig.leds[led]}" if cut else f"current, {rig.leds[led]}"
