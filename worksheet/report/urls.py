"""Addresses of this room."""

from django.urls import URLPattern, path

from . import views

urlpatterns: list[URLPattern] = [
    path("u/<slug:slug>/stay/<str:reference>/timeline.pdf", views.timeline, name="report_timeline"),
]
