"""Addresses of the screens."""

from django.urls import include, path

from . import home

urlpatterns = [path("", home.home, name="home"), path("", include("worksheet.review.urls_entry"))]
