"""What the hospital keeps track of: wants, stays, and the beds of a ward within an hour."""

from dataclasses import dataclass, field

from demo_data.patients import Patient, StayChances


@dataclass(slots=True)
class Want:
    """One patient wanting one ward: the hospital's true demand, met or not.

    `outcome` is "placed" on that ward, "outlier" on another, "lost" to another hospital,
    "cancelled" (booked), "sent to Heron" for good because the ward was full, or "waiting".
    """

    patient: Patient
    ward: str
    wanted_at: int
    came_from: str
    stay_number: int
    after_refusal: bool = False  # would not have wanted this ward, had an earlier one had a bed
    found_full: bool = False
    outcome: str = "waiting"
    placed_at: int | None = None
    placed_on: str = ""
    onward: "Want | None" = None  # a stroke patient sent to Heron still wants Teal

    @property
    def chances(self) -> StayChances:
        """The chances of the stay that is wanted."""
        return self.patient.stays[self.stay_number]


@dataclass(slots=True)
class Stay:
    """One patient in a bed of one ward, from `start` to `end` (None: still there)."""

    want: Want
    ward: str
    start: int
    end: int | None = None


@dataclass(frozen=True, slots=True)
class Waiting:
    """A patient whose stay is over, in its bed still until the next ward has one."""

    stay: Stay
    want: Want
    since: int


@dataclass(slots=True)
class WardState:
    """The beds of one ward during one hour."""

    open_beds: int = 0
    occupied: int = 0
    occupied_at_hour: int = 0
    placed_this_hour: int = 0
    left_this_hour: list[int] = field(default_factory=list)

    @property
    def free_beds(self) -> int:
        """How many beds can take a patient now?"""
        return self.open_beds - self.occupied

    def begin_hour(self) -> None:
        """Forget the hour before."""
        self.occupied_at_hour, self.placed_this_hour = self.occupied, 0
        self.left_this_hour.clear()

    def leave(self, minute: int) -> None:
        """Free one bed at a minute."""
        self.occupied -= 1
        self.left_this_hour.append(minute)

    def add(self) -> None:
        """Add one patient, whether or not there is a bed."""
        self.occupied += 1
        self.placed_this_hour += 1

    def take(self) -> int:
        """Take one bed, and return the earliest minute it may be used (0: it was free before this hour).

        The n-th patient placed within the hour waits for as many of the hour's leavers as
        there must be for the ward never to hold more than its open beds.
        """
        self.add()
        leavers_needed = self.occupied_at_hour + self.placed_this_hour - self.open_beds
        return sorted(self.left_this_hour)[leavers_needed - 1] if leavers_needed > 0 else 0
