"""Addresses of this room."""

from django.urls import URLPattern, path

from . import views

urlpatterns: list[URLPattern] = [
    path("u/<slug:slug>/unit.pdf", views.unit, name="report_unit"),
    path("u/<slug:slug>/stay/<str:ref>/timeline.pdf", views.timeline, name="report_timeline"),
]
