"""Addresses of the screens."""

from django.urls import path

from . import home

urlpatterns = [path("", home.home, name="home")]
