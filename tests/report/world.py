"""A unit with one invented stay, as the printing tests need it."""

from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

from django.utils import timezone

from worksheet.oxygen.readings import Device, Event, FlowMethod, Site
from worksheet.report.order import Order
from worksheet.ward import record
from worksheet.ward.display import Display
from worksheet.ward.models import Bed, Entry, Patient, Stay, Unit, User

START = datetime(2026, 3, 28, 18, tzinfo=UTC)  # the night to 29 March loses an hour in Zurich
DISPLAY = Display(ZoneInfo("Europe/Zurich"))


def make_stay(reference: str = "T-100", **unit_options) -> Stay:
    """A stay without entries."""
    unit, _ = Unit.objects.get_or_create(
        slug="north", defaults={"name": "Unit North", "time_zone": "Europe/Zurich", **unit_options}
    )
    patient = Patient.objects.create(system="test", identifier=f"P-{reference}")
    bed = Bed.objects.create(unit=unit, name=f"N{reference[2:]}", position=1)
    return Stay.objects.create(
        unit=unit, patient=patient, bed=bed, reference=reference, admitted_at=START - timedelta(hours=2),
        height=176.0, weight=79.0, age=91.0,
    )  # fmt: skip


def nurse() -> User:
    """Who records."""
    user, _ = User.objects.get_or_create(username="anna.recorder")
    return user


def gas(n: int, total: int, **more) -> dict[str, float]:
    """The n-th arterial slip of a slow bleed."""
    share = n / max(total - 1, 1)
    return {
        "ph": round(7.40 - 0.08 * share, 2), "pco2": 40.0 + round(6 * share), "po2": 96.0 - round(20 * share),
        "so2": round(0.97 - 0.02 * share, 3), "cohb": 0.01, "methb": 0.008, "fio2": 0.4,
        "hb": round(10.5 - 3 * share, 1), "lactate": round(1.2 + 2.4 * share, 1),
        "spo2": 0.97, "cardiac_output": round(5.0 + share, 1),
        "temperature": 37.0 + round(share, 1),
    } | more  # fmt: skip


def add_gases(stay: Stay, count: int, every: float = 2.0, drop: tuple[str, ...] = (), **more) -> list[Entry]:
    """Arterial gases every so many hours."""
    entries = []
    for n in range(count):
        values = {name: v for name, v in gas(n, count, **more).items() if name not in drop}
        new = record.NewEntry(START + timedelta(hours=every * n), Site.ARTERIAL, values, device=Device.VENTILATOR,
                              flow_method=FlowMethod.THERMODILUTION, key=f"{stay.reference}-{n}")  # fmt: skip
        entries.append(record.build(stay, nurse(), new))
    return Entry.objects.bulk_create(entries)


def add_story(stay: Stay) -> list[Entry]:
    """Eight gases with venous pairs, a bleed, a note, a correction and a strike-out."""
    entries = add_gases(stay, 8)
    for n in range(0, 8, 2):
        values = {"ph": 7.35, "pco2": 46.0, "po2": 35.0, "so2": 0.66, "lactate": 1.5}
        when = START + timedelta(hours=2 * n, minutes=5)
        record.record(stay, nurse(), record.NewEntry(when, Site.CENTRAL_VENOUS, values))
    bleed = record.NewEntry(START + timedelta(hours=7.5), event=Event.BLEED, event_amount=600, note="drain filled")
    record.record(stay, nurse(), bleed)
    fixed = record.NewEntry(entries[3].time, Site.ARTERIAL, gas(3, 8, hb=9.1), device=Device.VENTILATOR,
                            flow_method=FlowMethod.THERMODILUTION)  # fmt: skip
    record.correct(entries[3], nurse(), fixed, "read from the wrong slip")
    record.strike_out(entries[5], nurse(), "sample of the neighbour")
    return entries


def order(stay: Stay, **more) -> Order:
    """An order for all of a stay, now."""
    display = more.pop("display", None) or Display.of(None, stay.unit)
    return Order(stay, display, more.pop("printed_at", timezone.now()), "dr.reader", **more)
