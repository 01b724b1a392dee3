"""The hospital hour by hour: who leaves, who moves, who is placed, who is turned away.

The hospital looks at its beds once an hour. What happens within the hour happens in a fixed
order: patients leave; those waiting on Merlin, then Heron, move on; the emergency
department's queue fills Heron; at 07:00 the day's booked cases are accepted or cancelled;
new patients are placed. Times are whole minutes, and no bed is taken before the minute in
which it came free, so that the records can be read at any minute, not only on the hour.
Only Sandpiper can hold more patients than beds, between 13:00 and 20:00: a booked case comes
back from theatre soon after 13:00 to a bed whose patient is due out by 20:00.
"""

from collections import deque

from demo_data.beds import Stay, Waiting, Want, WardState
from demo_data.hospital import (
    HERON_TO_KESTREL,
    HERON_TO_PLOVER,
    HERON_TO_TEAL,
    HOURS_BEFORE_OTHERS_OUTLIE,
    HOURS_BEFORE_TEAL_OUTLIES,
    LARKMERE,
    MERLIN_TO_CURLEW,
    MERLIN_TO_KESTREL,
    WINDOW_TO,
    Hospital,
    month_factor,
)
from demo_data.patients import MINUTES_A_DAY, Patient, day_of, draw_patients, minute_at, stay_end

BOOKED_ACCEPTED_HOUR, BOOKED_START_HOUR, BOOKED_LEAVERS_BY_HOUR = 7, 13, 20
OTHER_PLACES = {"Teal": ("Plover", "Kestrel"), "Kestrel": ("Curlew", "Plover"), "Plover": ("Curlew", "Kestrel")}
FREE_BEDS_NEEDED = {"Curlew": 2}  # before Curlew takes another ward's patient


def booked_start(want: Want) -> int:
    """When on its day does a booked case come to its bed? Within the hour from 13:00."""
    midnight = want.wanted_at - want.wanted_at % MINUTES_A_DAY
    return midnight + BOOKED_START_HOUR * 60 + int(60 * want.chances.move_minute)


class Flow:
    """One run of the hospital: `stays` and `wants` hold what happened, in order."""

    def __init__(self, patients: list[Patient], hospital: Hospital) -> None:
        self.hospital = hospital
        self.patients = deque(patients)
        self.wards = {ward.name: WardState() for ward in hospital.wards}
        self.stays: list[Stay] = []
        self.wants: list[Want] = []
        self.due: dict[int, list[tuple[int, int, Stay]]] = {}  # hour -> (end, order, stay)
        self.waiting: dict[str, list[Waiting]] = {"Merlin": [], "Heron": []}
        self.queue: deque[Want] = deque()
        self.accepted: list[Want] = []

    def run_hour(self, hour: int) -> None:
        """Carry out one hour's rules in their order."""
        if hour % 24 == 0:
            for name, state in self.wards.items():
                state.open_beds = self.hospital.open_beds(name, day_of(hour * 60))
        for state in self.wards.values():
            state.begin_hour()
        newcomers = self._newcomers(hour)
        self._leave(hour)
        self._move_on(hour)
        self._fill_heron_from_queue(hour)
        self._booked(hour, [want for want in newcomers if want.came_from == "booked"])
        for want in newcomers:
            if want.came_from != "booked":
                self._place_newcomer(want)

    def _newcomers(self, hour: int) -> list[Want]:
        """Return what the patients want who ask for a bed within this hour."""
        wants = []
        while self.patients and self.patients[0].asks_at < (hour + 1) * 60:
            patient = self.patients.popleft()
            booked = self.hospital.by_name[patient.ward].weekday_lists
            wants.append(Want(patient, patient.ward, patient.asks_at, "booked" if booked else "outside", 0))
        self.wants += wants
        return wants

    def _further_want(self, before: Want, ward: str, minute: int, *, came_from: str) -> Want:
        """Note the next ward that a patient wants."""
        after_refusal = before.after_refusal or before.outcome == "sent to Heron"
        want = Want(before.patient, ward, minute, came_from, before.stay_number + 1, after_refusal)
        self.wants.append(want)
        return want

    def _place(self, want: Want, ward: str, minute: int) -> None:
        """Put a patient into a bed already taken: on the ward wanted, or as another ward's outlier.

        Outliers stay as long as patients of the ward they wanted.
        """
        want.outcome = "placed" if ward == want.ward else "outlier"
        want.placed_at, want.placed_on = minute, ward
        stay = Stay(want, ward, minute)
        self.stays.append(stay)
        end = stay_end(self.hospital.by_name[want.ward], want.chances, minute)
        self.due.setdefault(end // 60, []).append((end, len(self.stays), stay))

    # 1. Leavers free beds.

    def _leave(self, hour: int) -> None:
        """End the stays due within this hour; some of their patients wait there for the next ward."""
        for end, _, stay in sorted(self.due.pop(hour, []), key=lambda due: due[:2]):
            want = self._next_want(stay, end)
            if want is None:
                self._end(stay, end)
            else:
                self.waiting[stay.ward].append(Waiting(stay, want, end))

    def _end(self, stay: Stay, minute: int) -> None:
        """End a stay and free its bed."""
        stay.end = minute
        self.wards[stay.ward].leave(minute)

    def _next_want(self, stay: Stay, minute: int) -> Want | None:
        """Return what a patient wants whose stay is over, if they want another ward."""
        if stay.want.onward is not None:
            return stay.want.onward
        route = stay.want.patient.route
        for ward, share in self._routes(stay.ward, minute):
            if route < share:
                return self._further_want(stay.want, ward, minute, came_from=stay.ward)
            route -= share
        return None

    def _routes(self, ward: str, minute: int) -> tuple[tuple[str, float], ...]:
        """Where do patients of a ward go on to, with which chance?"""
        if ward == "Merlin":
            return (("Curlew", MERLIN_TO_CURLEW), ("Kestrel", MERLIN_TO_KESTREL))
        if ward != "Heron":
            return ()
        month, wards = day_of(minute).month, self.hospital.by_name
        season = month_factor(wards["Kestrel"].months, month) / month_factor(wards["Heron"].months, month)
        return (("Kestrel", HERON_TO_KESTREL * season), ("Plover", HERON_TO_PLOVER), ("Teal", HERON_TO_TEAL))

    # 2. Patients waiting on Merlin, then Heron, move when there is a bed.

    def _move_on(self, hour: int) -> None:
        """Move the waiting patients whose ward, or other place, has a bed: first come first served."""
        for ward, waiting in self.waiting.items():
            self.waiting[ward] = [entry for entry in waiting if not self._moved(entry, hour)]

    def _moved(self, entry: Waiting, hour: int) -> bool:
        """Move one waiting patient if a bed can be found; say whether it was."""
        place = self._place_for(entry.want.ward, hour * 60 - entry.since)
        if place is None:
            entry.want.found_full = True
            return False
        earliest = max(self.wards[place].take(), entry.since, hour * 60)
        minute = earliest + int(entry.want.chances.move_minute * ((hour + 1) * 60 - earliest))
        self._end(entry.stay, minute)
        self._place(entry.want, place, minute)
        return True

    def _place_for(self, ward: str, waited_minutes: int) -> str | None:
        """Return a ward with a bed for a waiting patient: their own, or another after long enough."""
        if self.wards[ward].free_beds > 0:
            return ward
        patience = HOURS_BEFORE_TEAL_OUTLIES if ward == "Teal" else HOURS_BEFORE_OTHERS_OUTLIE
        if waited_minutes < patience * 60:
            return None
        for place in OTHER_PLACES.get(ward, ()):
            if self.wards[place].free_beds >= FREE_BEDS_NEEDED.get(place, 1):
                return place
        return None

    # 3. The emergency department's queue fills Heron.

    def _fill_heron_from_queue(self, hour: int) -> None:
        """Place the patients who wait for Heron, first come first served, while it has beds."""
        heron = self.wards["Heron"]
        while self.queue and heron.free_beds > 0:
            want = self.queue.popleft()
            earliest = max(heron.take(), hour * 60)
            self._place(want, "Heron", earliest + int(want.chances.move_minute * ((hour + 1) * 60 - earliest)))

    # 4. Booked cases: accepted or cancelled at 07:00, in the bed in the hour from 13:00.

    def _booked(self, hour: int, asking: list[Want]) -> None:
        """Accept as many booked cases as there are beds free or due to be, and cancel the rest."""
        sandpiper = self.wards["Sandpiper"]
        if hour % 24 == BOOKED_ACCEPTED_HOUR:
            hours = range(hour, hour - BOOKED_ACCEPTED_HOUR + BOOKED_LEAVERS_BY_HOUR)
            leavers = [stay for later in hours for _, _, stay in self.due.get(later, ()) if stay.ward == "Sandpiper"]
            room = max(0, sandpiper.free_beds + len(leavers))
            self.accepted = asking[:room]
            for want in asking[room:]:
                want.outcome, want.found_full = "cancelled", True
        if hour % 24 == BOOKED_START_HOUR:
            for want in self.accepted:
                sandpiper.add()
                self._place(want, "Sandpiper", booked_start(want))
            self.accepted = []

    # 5. New patients are placed.

    def _place_newcomer(self, want: Want) -> None:
        """Place a new patient, or send them on to Heron, its queue, or another hospital."""
        ward = self.hospital.by_name[want.ward]
        if self.wards[ward.name].free_beds > 0:
            self._place(want, ward.name, max(want.wanted_at, self.wards[ward.name].take()))
            return
        want.found_full = True
        if ward.turns_away:
            want.outcome = "lost"
        elif ward.name == "Heron":
            self.queue.append(want)
        else:
            self._place_newcomer(self._want_heron_instead(want))

    def _want_heron_instead(self, want: Want) -> Want:
        """Return the want for Heron of a patient whose ward is full. Stroke patients still want Teal."""
        waits_for_teal = want.ward == "Teal"
        if not waits_for_teal:
            want.outcome = "sent to Heron"
        heron = self._further_want(want, "Heron", want.wanted_at, came_from=want.ward)
        heron.after_refusal = True
        heron.onward = want if waits_for_teal else None
        return heron


def simulate(seed: int, hospital: Hospital = LARKMERE) -> Flow:
    """What happens at Larkmere from 1 October 2021 to 31 March 2025, for this seed?

    Another `hospital` with the same wards meets the very same patients.

    Checked by: tests/demo_data/test_demo.py
    """
    flow = Flow(draw_patients(seed, hospital), hospital)
    for hour in range(minute_at(WINDOW_TO) // 60):
        flow.run_hour(hour)
    return flow
