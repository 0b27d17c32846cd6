"""What can be wrong with a body or a question about it, in physical terms.

CoreError
├── NotPhysical         a size, conductivity, map or source that no body can have
├── NoSteadyState       the flows given cannot balance, so no steady field exists
├── OutsideBody         a place asked for that is not in the closed body
├── OutsideLaw          the potential leaves the range in which the conductivity law holds
├── TooManyPanels       mixed faces with more pads than are solved together
├── AccuracyNotReached  the bound reached is wider than the one asked for
└── Interrupted         the time allowed for the computation is over

A message names the thing, the value received and what is allowed. `field` says which part of the body or the
question it is about, as a path of plain words such as `("sources", 1, "density")`, empty when it is the whole.
"""


class CoreError(Exception):
    """Base of all errors that the solver core raises on purpose."""

    def __init__(self, message: str, field: tuple[str | int, ...] = ()) -> None:
        super().__init__(message)
        self.message = message
        self.field = field


class NotPhysical(CoreError):
    """A body that cannot exist: a negative length, a map that does not cover its face."""


class NoSteadyState(CoreError):
    """Every face is insulated or has a given inflow and the flows do not add up to zero.

    sentence: the message with `{amount}` in place of the imbalance, for whoever knows its unit. per_length: whether
    the imbalance is a flow per length of an endless bar.
    """

    def __init__(
        self, sentence: str, imbalance: float, field: tuple[str | int, ...] = (), *, per_length: bool = False
    ) -> None:
        super().__init__(sentence.format(amount=f"{imbalance:.6g}"), field)
        self.sentence = sentence
        self.imbalance = imbalance
        self.per_length = per_length


class OutsideBody(CoreError):
    """A grid coordinate, point, plane or rectangle that lies outside the closed body."""


class OutsideLaw(CoreError):
    """A held value or the field itself leaves the range in which the law of the conductivity holds."""


class TooManyPanels(CoreError):
    """Mixed faces whose pads take more panels at the least than are allowed. needed, allowed: how many."""

    def __init__(self, message: str, needed: int, allowed: int, field: tuple[str | int, ...] = ()) -> None:
        super().__init__(message, field)
        self.needed = needed
        self.allowed = allowed


class AccuracyNotReached(CoreError):
    """The bound that can be promised is wider than the accuracy asked for; both in the unit of the potential."""

    SENTENCE = "The accuracy asked for is {asked}; the best bound that can be promised here is {bound}."

    def __init__(self, asked: float, bound: float) -> None:
        super().__init__(self.SENTENCE.format(asked=f"{asked:.3g}", bound=f"{bound:.3g}"), ("accuracy",))
        self.asked = asked
        self.bound = bound


class Interrupted(CoreError):
    """The time allowed was over before the answer was complete."""
