"""The chain runs over a salted digest of each event's content, so that content can be erased on lawful order.

Events written before keep their empty digest and the link they were written with. SQLite makes the table anew to add a
column, and its triggers go with the old one: they are put back here.
"""

from importlib import import_module
from typing import Any

from django.db import migrations, models


def triggers_again(apps: Any, schema_editor: Any) -> None:
    """All triggers, whether they were lost or not."""
    first = import_module("worksheet.ward.migrations.0002_append_only")
    first.backwards(apps, schema_editor)
    first.forwards(apps, schema_editor)


class Migration(migrations.Migration):
    dependencies = [("ward", "0004_guards_and_logins")]
    operations = [
        migrations.AddField("auditevent", "salt", models.CharField(blank=True, default="", max_length=32)),
        migrations.AddField("auditevent", "content_hash", models.CharField(blank=True, default="", max_length=64)),
        migrations.RunPython(triggers_again, triggers_again),
    ]
