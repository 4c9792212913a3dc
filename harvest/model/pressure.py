"""Pressure drop of a side, part by part, and the power that drives its flow."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from harvest.model.batch import Batch
from harvest.model.design import Stream
from harvest.physics.arrays import FloatArray
from harvest.physics.ducts import LAMINAR_LIMIT
from harvest.physics.losses import (
    LAMINAR_MOMENTUM_FACTOR,
    TURBULENT_MOMENTUM_FACTOR,
    drive_power,
    entrance_loss_coefficient,
    exit_loss_coefficient,
    velocity_head,
)
from harvest.physics.rated import RatedFilm


@dataclass(frozen=True, eq=False, repr=False)
class PressureDrop:
    """Parts of a side's pressure drop [Pa], (cases,)."""

    friction: FloatArray
    acceleration: FloatArray
    ends: FloatArray
    fittings: FloatArray
    connections: FloatArray

    @property
    def total(self) -> FloatArray:
        """Sum of the parts [Pa]."""
        return self.friction + self.acceleration + self.ends + self.fittings + self.connections


def pressure_drop(
    batch: Batch, stream: Stream, boundaries: FloatArray, outlet: FloatArray, active: FloatArray, row_length: FloatArray
) -> PressureDrop:
    """Pressure drop of one side at solved temperatures.

    Parameters: `boundaries`, stream temperature at the row boundaries [K], (rows + 1, cases); `outlet` temperature [K],
    (cases,); `active`, 1 where a case has the row, (rows, cases); `row_length` [m], (cases,).
    Source: rated blocks by similarity (`RatedFilm`); else friction by the duct's law at local density and Kays 1950 for
    the ends; properties at inlet pressure.
    """
    fluid, film, side = stream.fluid, stream.film, stream.name
    nothing = np.zeros(batch.cases)
    if fluid is None or film is None:
        return PressureDrop(nothing, nothing, nothing, nothing, nothing)
    mean = 0.5 * (boundaries[:-1] + boundaries[1:])
    ends = np.stack([stream.inlet_temperature, outlet])
    density = fluid.density(ends)
    pipe = batch.number(f"{side}.duct.connection_diameter")
    pipe_area = 0.25 * np.pi * np.where(np.isnan(pipe), 1.0, pipe) ** 2
    connections = batch.number(f"{side}.duct.connection_loss_coefficient", 0.0) * velocity_head(
        stream.mass_flow, pipe_area, density[0]
    )
    factor = batch.number(f"{side}.duct.friction_loss_factor", 1.0)
    if isinstance(film, RatedFilm):
        local = film.local_pressure_drop(fluid.density(mean), fluid.viscosity(mean))
        blocks = factor * film.in_series * (local * active).sum(axis=0) / active.sum(axis=0)
        return PressureDrop(blocks, nothing, nothing, nothing, connections)
    reynolds = film.reynolds(fluid.viscosity(mean))
    head = 0.5 * film.mass_flux**2 / fluid.density(mean)
    friction = film.friction_factor(reynolds) * (row_length / film.hydraulic_diameter) * head
    end_heads = 0.5 * film.mass_flux**2 / density
    laminar = film.reynolds(fluid.viscosity(ends)) < LAMINAR_LIMIT
    momentum = np.where(laminar, LAMINAR_MOMENTUM_FACTOR, TURBULENT_MOMENTUM_FACTOR)
    ratio = batch.number(f"{side}.duct.frontal_area_ratio", 0.0)
    entrance = batch.number(f"{side}.duct.entrance_loss_coefficient")
    entrance = np.where(np.isnan(entrance), entrance_loss_coefficient(ratio, momentum[0]), entrance)
    leaving = batch.number(f"{side}.duct.exit_loss_coefficient")
    leaving = np.where(np.isnan(leaving), exit_loss_coefficient(ratio, momentum[1]), leaving)
    return PressureDrop(
        friction=factor * (friction * active).sum(axis=0),
        acceleration=2.0 * (end_heads[1] - end_heads[0]),
        ends=entrance * end_heads[0] + leaving * end_heads[1],
        fittings=batch.number(f"{side}.duct.minor_loss_coefficient", 0.0) * end_heads[0],
        connections=connections,
    )


def handled_density(batch: Batch, stream: Stream, outlet: FloatArray) -> FloatArray:
    """Density of what a side's drive handles [kg/m^3], (cases,): at the inlet, or behind the stack at `outlet` [K]."""
    assert stream.fluid is not None
    behind = getattr(batch.base, stream.name).drive_position == "outlet"
    return np.asarray(stream.fluid.density((outlet if behind else stream.inlet_temperature)[None])[0])


def side_drive_power(batch: Batch, stream: Stream, drop: FloatArray, outlet: FloatArray) -> FloatArray:
    """Electrical power that a side's pressure drop costs [W], (cases,); `drop` [Pa], `outlet` temperature [K].

    A pump or fan behind the stack handles the stream at its outlet temperature: a gas at T_out/T_in of the power.
    An engine pays with shaft power that its generator would have turned into electricity: back pressure times swept
    volume flow; where only the exhaust flow is known, its volume flow at the inlet, which is an upper bound.
    """
    side = stream.name
    drive = getattr(batch.base, side).drive
    if stream.fluid is None or drive == "free":
        return np.zeros(batch.cases)
    density = handled_density(batch, stream, outlet)
    if drive == "engine":
        swept = batch.number(f"{side}.swept_volume_flow")
        swept = np.where(np.isnan(swept), stream.mass_flow / density, swept)
        return drop * swept * batch.number(f"{side}.generator_efficiency")
    return drive_power(stream.mass_flow, drop, density, batch.number(f"{side}.drive_efficiency"))
