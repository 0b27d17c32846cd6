"""Networks of held pads against the fields that they sum up."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from service.core.conditions import Condition, FilmPad, Held, HeldPad, Insulated, Mixed
from service.core.errors import NoSteadyState, NotPhysical
from service.core.faces import Face
from service.core.maps import FaceMap, Rectangle
from service.core.mixed import solve_mixed
from service.core.pad_network import PadNetwork, pad_network
from service.core.problem import Body

FEED, BACK, LUG = Rectangle(0.1, 0.3, 0.2, 0.8), Rectangle(0.6, 0.9, 0.2, 0.8), Rectangle(0.4, 0.5, 0.0, 0.1)
FILM = FilmPad(LUG, 40.0, 0.0)


def plate(*pads: HeldPad | FilmPad) -> Body:
    """A plate whose only ways out are pads on top."""
    faces: dict[Face, Condition] = dict.fromkeys(("x_low", "x_high", "y_low", "y_high", "z_low"), Insulated())
    return Body((1.0, 1.0, 0.3), (2.0, 2.0, 1.5), faces | {"z_high": Mixed(Insulated(), pads)})


@pytest.fixture(scope="module")
def network() -> PadNetwork:
    return pad_network(plate(HeldPad(FEED, 0.0), HeldPad(BACK, 0.0), FILM), accuracy=1e-4)


def test_conductance_to_the_environment_is_what_flows_between_pads_held_alike(network: PadNetwork) -> None:
    flows = [pad.flow for pad in solve_mixed(plate(HeldPad(FEED, 1.0), HeldPad(BACK, 1.0), FILM), accuracy=1e-5).pads()]
    assert not network.closed
    for index in range(2):
        slack = network.to_environment_bound[index] + flows[index].error_bound
        assert network.to_environment[index] == pytest.approx(flows[index].value, abs=slack)
    assert network.to_environment_bound.max() < 0.01 * network.to_environment.min()


def test_rises_are_the_levels_of_pads_that_are_fed(network: PadNetwork) -> None:
    rises, bound = network.rises()
    levels = [
        pad.potential
        for pad in solve_mixed(plate(HeldPad(FEED, flow=1.0), HeldPad(BACK, flow=0.0), FILM), accuracy=1e-5).pads()
    ]
    for index in range(2):
        assert rises[index, 0] == pytest.approx(levels[index].value, abs=bound[index, 0] + levels[index].error_bound)
    assert rises == pytest.approx(rises.T, abs=1e-9 * rises.max())
    assert bound.max() < 0.01 * rises.min()
    # The difference of two rises is the resistance between the pads.
    pair = network.resistance(0, 1)
    across = rises[0, 0] + rises[1, 1] - 2 * rises[0, 1]
    assert pair.value == pytest.approx(across, abs=pair.error_bound + 4 * bound.max())


def test_pads_left_out_are_held_at_zero(network: PadNetwork) -> None:
    part = pad_network(plate(HeldPad(FEED, 0.0), HeldPad(BACK, 0.0), FILM), [("z_high", 1)], accuracy=1e-4)
    assert part.conductance[0, 0] == pytest.approx(network.conductance[1, 1], rel=1e-4)
    assert part.to_environment[0] == pytest.approx(network.conductance[1, 1], abs=network.error_bound[1, 1])
    rises, bound = part.rises()
    assert rises[0, 0] == pytest.approx(1 / part.to_environment[0], abs=bound[0, 0] + 1e-3 * rises[0, 0])


def test_pads_alone_have_no_rises_above_an_environment() -> None:
    body = plate(HeldPad(FEED, 0.0), HeldPad(BACK, 0.0))
    closed = pad_network(body, accuracy=1e-2)
    assert closed.closed
    assert closed.to_environment.tolist() == [0.0, 0.0]
    with pytest.raises(NotPhysical, match="Nothing but the pads"):
        closed.rises()
    part = pad_network(body, [("z_high", 0)], accuracy=1e-2)
    assert not part.closed
    assert np.isfinite(part.rises()[0]).all()


def test_pads_come_in_the_order_they_are_asked_for(network: PadNetwork) -> None:
    body = plate(HeldPad(FEED, 0.0, name="feed"), HeldPad(BACK, 0.0, name="back"), FILM)
    turned = pad_network(body, [("z_high", 1), ("z_high", 0)], accuracy=1e-4)
    assert [name for _, _, name in turned.pads] == ["back", "feed"]
    assert turned.conductance == pytest.approx(network.conductance[::-1, ::-1], rel=1e-9)


def test_single_pad_without_a_way_out_has_no_conductance() -> None:
    with pytest.raises(NoSteadyState, match="no way out"):
        pad_network(plate(HeldPad(FEED, 0.0)))


BESIDE = Rectangle(FEED.p_high, 0.5, 0.2, 0.8)


def test_pads_that_share_an_edge_have_no_conductance_at_any_values() -> None:
    """At one value they are one electrode, and may be asked for its flow; between them nothing resists."""
    body = plate(HeldPad(FEED, 1.0), HeldPad(BESIDE, 1.0), HeldPad(BACK, 0.0))
    with pytest.raises(NotPhysical, match="pads 0 and 1 of z_high touch along an edge") as refused:
        pad_network(body)
    assert refused.value.field == ("faces", "z_high", "pads", 1)
    # The third sees them as one.
    alone, one = pad_network(body, [("z_high", 2)]), Rectangle(FEED.p_low, BESIDE.p_high, 0.2, 0.8)
    joined = pad_network(plate(HeldPad(one, 1.0), HeldPad(BACK, 0.0)), [("z_high", 1)])
    slack = alone.error_bound[0, 0] + joined.error_bound[0, 0]
    assert alone.conductance[0, 0] == pytest.approx(joined.conductance[0, 0], abs=slack)
    assert slack < 1e-3 * joined.conductance[0, 0]


def test_pad_that_touches_a_held_side_has_no_conductance() -> None:
    body = plate(HeldPad(Rectangle(0.0, 0.3, 0.2, 0.8), 0.0), HeldPad(BACK, 0.0))
    held = replace(body, faces={**body.faces, "x_low": Held(FaceMap.uniform(0.0))})
    with pytest.raises(NotPhysical, match="touches the held face x_low"):
        pad_network(held)
