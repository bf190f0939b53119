"""Addresses of the screens."""

from django.urls import include, path

from . import home, patient, unit

_STAY = "u/<slug:slug>/stay/<str:ref>/"

urlpatterns = [
    path("", home.home, name="home"),
    path("", include("worksheet.review.urls_entry")),
    path("u/<slug:slug>/", unit.unit_review, name="unit_review"),
    path(_STAY, patient.patient, name="patient"),
    path(f"{_STAY}reviewed", patient.mark_reviewed, name="mark_reviewed"),
]
