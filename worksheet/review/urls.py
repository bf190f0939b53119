"""Addresses of the screens."""

from django.urls import include, path

from . import explain, home, methods, patient, theme, unit

_STAY = "u/<slug:slug>/stay/<str:ref>/"

urlpatterns = [
    path("", home.home, name="home"),
    path("", include("worksheet.review.urls_entry")),
    path("theme", theme.set_theme, name="set_theme"),
    path("methods/", methods.methods, name="methods"),
    path("u/<slug:slug>/", unit.unit_review, name="unit_review"),
    path("u/<slug:slug>/methods/", methods.methods, name="unit_methods"),
    path(_STAY, patient.patient, name="patient"),
    path(f"{_STAY}explain/<int:entry_id>/<slug:quantity>/", explain.explain, name="explain"),
    path(f"{_STAY}reviewed", patient.mark_reviewed, name="mark_reviewed"),
]
