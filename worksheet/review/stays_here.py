"""Who lies in a unit: stays in bed order, each with its last review, in one query."""

from __future__ import annotations

from django.db.models import OuterRef, Subquery

from worksheet.ward.models import ReviewMark, Stay, Unit, User
from worksheet.ward.models.places import StayQuerySet


def with_reviews(stays: StayQuerySet, user: User) -> StayQuerySet:
    """Add when and by whom each stay was last reviewed, and when this person last did."""
    marks = ReviewMark.objects.filter(stay=OuterRef("pk")).order_by("-at")
    return stays.annotate(
        reviewed_at=Subquery(marks.values("at")[:1]),
        reviewed_by=Subquery(marks.values("user__username")[:1]),
        my_review_at=Subquery(marks.filter(user=user).values("at")[:1]),
    )


def present(unit: Unit, user: User) -> list[Stay]:
    """The stays of a unit that this person may see, in the order of the round."""
    return list(with_reviews(Stay.objects.visible_to(user).filter(unit=unit).present().in_bed_order(), user))
