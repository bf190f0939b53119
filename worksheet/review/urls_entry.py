"""Addresses of everything people type; included once in the room's addresses."""

from django.urls import path

from . import correction, drafts, entry, events, preferences, stays, withdrawal

_STAY = "u/<slug:slug>/stay/<str:ref>/"

urlpatterns = [
    path(f"{_STAY}entry/new", entry.entry_new, name="entry_new"),
    path(f"{_STAY}entry/live", entry.entry_live, name="entry_live"),
    path(f"{_STAY}entry/<int:entry_id>/correct", correction.entry_correct, name="entry_correct"),
    path(f"{_STAY}entry/<int:entry_id>/strike", withdrawal.entry_strike, name="entry_strike"),
    path(f"{_STAY}event/new", events.event_new, name="event_new"),
    path(f"{_STAY}facts", stays.stay_edit, name="stay_edit"),
    path("u/<slug:slug>/stay/new", stays.stay_new, name="stay_new"),
    path("preferences/", preferences.preferences, name="preferences"),
    path(f"{_STAY}draft", drafts.draft_save, name="draft_save"),
    path("form/token", drafts.form_token, name="form_token"),
]
