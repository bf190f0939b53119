"""Addresses of everything people type; included once in the room's addresses."""

from django.urls import path

from . import drafts, entry

_STAY = "u/<slug:slug>/stay/<str:ref>/"

urlpatterns = [
    path(f"{_STAY}entry/new", entry.entry_new, name="entry_new"),
    path(f"{_STAY}entry/live", entry.entry_live, name="entry_live"),
    path(f"{_STAY}entry/<int:entry_id>/correct", entry.entry_correct, name="entry_correct"),
    path(f"{_STAY}draft", drafts.draft_save, name="draft_save"),
    path("form/token", drafts.form_token, name="form_token"),
]
