"""What a conductivity that varies or a face that radiates asks of a body, its data and the field found."""

from __future__ import annotations

import math

import numpy as np

from service.core.climbing import Place
from service.core.conditions import Film, Held, Inflow, Insulated
from service.core.errors import NotPhysical, OutsideLaw
from service.core.faces import axes_along
from service.core.film_iteration import below_absolute_zero
from service.core.kirchhoff import Transformed
from service.core.laws import LARGEST_FACTOR, SMALLEST_FACTOR, ConductivityLaw, Kirchhoff
from service.core.problem import Body
from service.core.solvability import generation, level_is_pinned, map_integral
from service.core.varying_answers import STORED


def check_supported(body: Body) -> None:
    """Raise NotPhysical for what a varying conductivity or radiation cannot be combined with."""
    if body.layers:
        raise NotPhysical(
            "A stack of layers is solved with conductivities that do not vary with the potential and without "
            "radiation; give each layer the conductivity at its own mean potential instead.",
            ("law",) if body.law is not None else ("faces",),
        )
    for face, condition in body.faces.items():
        if not isinstance(condition, Held | Inflow | Film | Insulated):
            raise NotPhysical(
                f"The face {face} has several conditions at once, which are solved with a conductivity that does not "
                "vary with the potential and without radiation; give the conductivity at the mean potential instead.",
                ("faces", face),
            )
    if all(math.isinf(length) for length in body.size) and any(isinstance(c, Film) for c in body.faces.values()):
        raise NotPhysical(
            "A film on a body that ends along no axis is solved with a conductivity that does not vary with the "
            "potential and without radiation; give the body a finite size along one axis.",
            ("size",),
        )
    if level_is_pinned(body):
        raise NotPhysical(
            "No face fixes the level of the potential, on which a varying conductivity depends; hold a face or give "
            "it a film.",
            ("faces",),
        )


def check_data(data: Transformed, low: float, high: float) -> None:
    """Raise OutsideLaw or NotPhysical for data of the faces, from low to high, that the body cannot have."""
    _check_held(data)
    _check_factors(data.kirchhoff, low, high)
    check_above_absolute_zero(data, low)
    _check_radiation(data)


def _check_held(data: Transformed) -> None:
    body, law = data.body, data.kirchhoff.law
    for face in body.present_faces:
        condition = body.faces[face]
        if isinstance(condition, Held) and not (
            law.low <= condition.value.lowest and condition.value.highest <= law.high
        ):
            raise OutsideLaw(
                f"The face {face} is held at {_from_to(condition.value.lowest, condition.value.highest)}; the "
                f"conductivity law holds {_range_of(law)}.",
                ("faces", face),
            )


def _check_factors(kirchhoff: Kirchhoff, low: float, high: float) -> None:
    """Raise NotPhysical where the factor of the law at the data of the faces is no number to compute with."""
    # Outside the law's range its last factor goes on.
    least, most = kirchhoff.factor_range(low, high)
    if not SMALLEST_FACTOR <= least <= most <= LARGEST_FACTOR:
        raise NotPhysical(
            f"The factor of the conductivity law goes from {least:g} to {most:g} at the values given on the faces; it "
            f"has to lie between {SMALLEST_FACTOR:g} and {LARGEST_FACTOR:g} there.",
            ("law",),
        )


def check_above_absolute_zero(data: Transformed, coldest: float) -> None:
    """Raise NotPhysical where a face radiates and the body comes down to absolute zero or below."""
    for face, law in data.laws.items():
        if law.radiation is not None and coldest + law.radiation.zero <= 0.0:
            raise below_absolute_zero(face, coldest)


def absolute_zero(data: Transformed) -> float:
    """The potential that is absolute zero where a face radiates; -infinity where none does."""
    zeros = [law.radiation.zero for law in data.laws.values() if law.radiation is not None]
    return -zeros[0] if zeros else -math.inf


def _check_radiation(data: Transformed) -> None:
    """Raise NotPhysical where more is taken out than radiation, the only way in, gives a body at absolute zero."""
    body = data.body
    only_radiation = all(law.radiation is not None and law.coefficient == 0.0 for law in data.laws.values())
    is_held = any(isinstance(condition, Held) for condition in body.faces.values())
    if is_held or not only_radiation or not all(math.isfinite(length) for length in body.size):
        return
    taken, given = -generation(body), 0.0
    for face, condition in body.faces.items():
        first, second = (body.size[axis] for axis in axes_along(face))
        if isinstance(condition, Inflow):
            taken -= map_integral(condition.inflow, (0.0, 0.0), (first, second))[0]
        if face in data.laws:
            radiation = data.laws[face].radiation
            assert radiation is not None
            least = float(data.laws[face].given_off(np.array([-radiation.zero]))[0])
            given += map_integral(data.given[face], (0.0, 0.0), (first, second))[0] - least * first * second
    if taken >= given:
        raise NotPhysical(
            f"The body loses {taken / given:.3g} times what radiation from its surroundings could bring in even at "
            "absolute zero; there is no steady state. Take out less, or give a face a film coefficient.",
            ("faces", next(iter(data.laws))),
        )


def has_flows(body: Body) -> bool:
    """Whether an inflow or a source may take the potential out of the range of held values and ambients."""
    inflow = any(isinstance(condition, Inflow) and condition.inflow.table.any() for condition in body.faces.values())
    return inflow or any(source.density != 0.0 for source in body.sources)


def is_close(low: float, high: float, coldest: Place, hottest: Place) -> bool:
    """Whether it takes better bounds to tell if the field leaves a range."""
    distances = ((abs(hottest.value - high), hottest), (abs(low - coldest.value), coldest))
    return any(STORED * abs(place.value) < distance <= place.error_bound for distance, place in distances)


def check_reached(law: ConductivityLaw, coldest: Place, hottest: Place) -> None:
    """Raise OutsideLaw where the potential leaves the range that its law holds for."""
    for place, end, beyond, reach in (
        (hottest, law.high, hottest.value - law.high, "up"),
        (coldest, law.low, law.low - coldest.value, "down"),
    ):
        if beyond > max(place.error_bound, STORED * abs(place.value)):
            at = ", ".join(f"{coordinate:g}" for coordinate in place.position)
            raise OutsideLaw(
                f"The potential reaches about {place.value:.6g} at ({at}), {_on(place.where)}, where the "
                f"conductivity law ends at {end:g}; it has to hold {reach} to {place.value:.6g} or further. That "
                "value is what the last factor, carried on, would lead to.",
                ("law",),
            )


def _on(where: str) -> str:
    return "inside" if where == "inside" else f"on {where}"


def _from_to(low: float, high: float) -> str:
    return f"{low:.6g}" if low == high else f"{low:.6g} to {high:.6g}"


def _range_of(law: ConductivityLaw) -> str:
    if math.isinf(law.low):
        return f"below {law.high:.6g}"
    return f"above {law.low:.6g}" if math.isinf(law.high) else f"from {law.low:.6g} to {law.high:.6g}"
