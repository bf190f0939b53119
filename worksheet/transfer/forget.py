"""What this room holds of a patient who is deleted on lawful order: waiting rows, messages, files and their reports."""

from __future__ import annotations

import json
from typing import Any

from django.dispatch import receiver

from worksheet.ward.forget import forgetting
from worksheet.ward.models import Patient

from .models import QueuedRow, RawMessage, Upload


@receiver(forgetting)
def forget_waiting(sender: object, patient: Patient, words: list[str], **_: Any) -> None:
    """Delete every row, message and upload that names the patient or a stay."""
    QueuedRow.objects.filter(patient__in=words).delete()
    for model in (QueuedRow, RawMessage, Upload):
        for item in model._default_manager.iterator(chunk_size=200):
            if _names(item, words):
                item.delete()


def _names(item: Any, words: list[str]) -> bool:
    """Whether one of the words stands anywhere in what is held."""
    held = json.dumps([getattr(item, "data", None), getattr(item, "report", None)], ensure_ascii=False, default=str)
    content = bytes(getattr(item, "content", None) or b"")
    return any(word in held or word.encode() in content for word in words)
