"""Dryers, baths and drains: properties on lines that hypothesis makes up, and plain cases."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from daemon.moisture.description import Line
from daemon.moisture.model import Heard, Model, State
from tests.daemon.moisture.fitted_lines import fitted_lines
from tests.daemon.moisture.test_balance import PERIOD_US, records

Record = list[dict[str, float]]


@st.composite
def fitted_records(draw: st.DrawFn) -> Record:
    """As for plain lines, with a dryer's contact, a room's temperature, and tanks let down."""
    record = draw(records())
    generator = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    let_down = draw(st.booleans())
    for number, values in enumerate(record):
        values["p.contact"] = float(generator.random() < 0.7)
        values["room.t"] = 303.15 + generator.normal(0.0, 2.0)
        values["hours.open"] = float(generator.random() < 0.8)
        if let_down and number > len(record) // 2:
            for name in [
                name for name in values if name.endswith(".pressure") and name != "air.pressure"
            ]:
                values[name] = 1_000.0
    return [{n: v for n, v in each.items() if generator.random() < 0.95} for each in record]


def run(model: Model, record: Record, period_us: int = PERIOD_US) -> State:
    state: State | None = None
    for number, values in enumerate(record):
        now_us = number * period_us
        is_open = values.get("hours.open", 1.0) > 0.5
        heard = Heard({name: [(now_us, v, True)] for name, v in values.items()}, is_open)
        state = (
            model.initial(now_us, heard) if state is None else model.step(state, now_us, heard)[0]
        )
    assert state is not None
    return state


@settings(max_examples=120, deadline=None)
@given(fitted_lines(), fitted_records())
def test_no_water_is_made_or_lost_by_dryers_and_drains(description: Line, record: Record) -> None:
    state = run(Model(description), record)
    assert state.ledger.residual(state.water).max() <= 1e-9
    water, ledger = state.water, state.ledger
    for array in (
        water.trap,
        water.waiting,
        water.spilled,
        water.vapor,
        ledger.beds,
        ledger.passed,
    ):
        assert array.min() >= -1e-15
    charge = state.fittings.charge
    assert np.all(charge <= state.parameters.fittings.holds_kg * (1.0 + 1e-12))


@settings(max_examples=60, deadline=None)
@given(fitted_lines(), fitted_records())
def test_no_air_is_made_or_lost_by_a_purge(description: Line, record: Record) -> None:
    """What was drawn in is used or still stored; outlets and purges are all that is used."""
    model = Model(description)
    state = model.initial(0, Heard({}))
    began = state.air.stored.sum(0)
    outlets = np.zeros(description.members)
    for number, values in enumerate(record[1:], 1):
        heard = Heard({name: [(number * PERIOD_US, v, True)] for name, v in values.items()})
        before = state.air
        state, moved = model.step(state, number * PERIOD_US, heard)
        seen = [a and not b for a, b in zip(state.air.seen, before.seen, strict=True)]
        began = began + (state.air.first - before.first)[seen].sum(0)
        outlets = outlets + moved.used_kg
    air = state.air
    assert np.allclose(air.drawn - air.used, air.stored.sum(0) - began, rtol=0.0, atol=1e-9)
    assert np.all(air.purged >= 0.0)
    assert np.all(air.purged.sum(0) <= air.used + 1e-12)
    assert np.allclose(outlets, air.used)


@settings(max_examples=60, deadline=None)
@given(fitted_lines(ice=False), fitted_records(), st.floats(0.0, 0.9))
def test_a_drier_intake_never_means_more_condensate(
    description: Line, record: Record, part: float
) -> None:
    """Without ice: less vapor lets a bath's ice last longer, and colder air sheds more then.

    A compressor draws volumes: drier air brings a little more dry air in the room of the vapor that
    it lacks, and that moves a little more of what was in the tank before. Hence the 1e-5.
    """
    first = {"air.relative_humidity": 0.6} | record[0]
    record = [first, *record[1:]]
    dry = [
        {n: v * part if n == "air.relative_humidity" else v for n, v in each.items()}
        for each in record
    ]
    model = Model(description)

    def condensate(state: State) -> np.ndarray[tuple[int, ...], np.dtype[np.float64]]:
        water, ledger = state.water, state.ledger
        held = water.trap.sum(0) + water.waiting.sum(0) + water.spilled.sum(0)
        out = ledger.liquid_out + ledger.drained + ledger.passed.sum(0) + ledger.beds
        return np.asarray(held + out)

    assert np.all(
        condensate(run(model, dry)) <= condensate(run(model, record)) * (1.0 + 1e-5) + 1e-12
    )


@settings(max_examples=60, deadline=None)
@given(fitted_lines(ice=False), fitted_records())
def test_a_dryer_that_is_out_of_service_is_a_pipe(description: Line, record: Record) -> None:
    out, pipes = [], []
    for station in description.stations:
        if station.dryer is not None:
            power = replace(station.dryer.power, in_service=False)
            out.append(replace(station, dryer=replace(station.dryer, power=power)))
            pipes.append(replace(station, kind="pipe", dryer=None, around=None))
        else:
            out.append(station)
            pipes.append(station)
    dryers = run(Model(replace(description, stations=tuple(out))), record)
    pipe = run(Model(replace(description, stations=tuple(pipes))), record)
    for name in ("trap", "waiting", "spilled", "vapor", "leaving_ratio"):
        assert np.array_equal(getattr(dryers.water, name), getattr(pipe.water, name)), name
    assert dryers.ledger.beds.max() == 0.0
    assert dryers.air.purged.sum() == 0.0
