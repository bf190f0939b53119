"""Who lies in a unit: stays in bed order, each with its last review, in one query."""

from __future__ import annotations

from typing import Any

from django.db.models import OuterRef, Subquery
from django.http import Http404, HttpRequest

from worksheet.ward.access import person
from worksheet.ward.models import Entry, Membership, ReviewMark, Stay, Unit, User
from worksheet.ward.models.places import StayQuerySet


def with_reviews(stays: StayQuerySet, user: User) -> StayQuerySet:
    """Add when and by whom each stay was last reviewed, when this person last did, and their role here."""
    marks = ReviewMark.objects.filter(stay=OuterRef("pk")).order_by("-at")
    return stays.annotate(
        reviewed_at=Subquery(marks.values("at")[:1]),
        reviewed_by=Subquery(marks.values("user__username")[:1]),
        my_role=Subquery(Membership.objects.filter(unit=OuterRef("unit"), user=user).values("role")[:1]),
        my_review_at=Subquery(marks.filter(user=user).values("at")[:1]),
    )


def present(unit: Unit, user: User) -> list[Any]:
    """The stays of a unit that this person may see, in the order of the round."""
    return present_at(unit.slug, user, unit)


def present_at(slug: str, user: User, unit: Unit | None = None) -> list[Any]:
    """The same by the unit's short name, the unit read along with them: one query for all."""
    own = Stay.objects.visible_to(user).filter(unit__slug=slug).present().in_bed_order()
    newest = Entry.objects.order_by("-pk").values("pk")[:1]
    stays = list(
        with_reviews(own if unit else own.select_related("unit"), user).annotate(newest_entry=Subquery(newest))
    )
    for stay in stays:
        stay.unit = unit or stays[0].unit  # one object, not one a stay
    return stays


def find(request: HttpRequest, unit: Unit, reference: str) -> Stay:
    """A stay of the unit, ended ones included, or 404."""
    user = person(request)
    own = Stay.objects.visible_to(user).filter(unit=unit, reference=reference).select_related("bed", "patient")
    stay = with_reviews(own, user).first()
    if stay is None:
        raise Http404("No such stay in this unit.")
    stay.unit = unit
    return stay
