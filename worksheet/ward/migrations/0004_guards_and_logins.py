"""SQLite's INSERT OR REPLACE removes rows that clash in any unique column, past the delete trigger: guard those too."""

from typing import Any

from django.db import migrations, models

# Table, and the unique columns by which INSERT OR REPLACE could push out an earlier row.
GUARDED = {"ward_entry": ("key", "replaces_id")}


def forwards(apps: Any, schema_editor: Any) -> None:
    """Add the guards."""
    if schema_editor.connection.vendor != "sqlite":
        return
    with schema_editor.connection.cursor() as cursor:
        for table, columns in GUARDED.items():
            for column in columns:
                cursor.execute(
                    f"CREATE TRIGGER {table}_no_replace_by_{column} BEFORE INSERT ON {table} "
                    f"WHEN EXISTS (SELECT 1 FROM {table} WHERE {column} = NEW.{column}) "
                    f"BEGIN SELECT RAISE(ABORT, '{table} is append-only: {column} is there already'); END"
                )


def backwards(apps: Any, schema_editor: Any) -> None:
    """Take the guards away."""
    if schema_editor.connection.vendor != "sqlite":
        return
    with schema_editor.connection.cursor() as cursor:
        for table, columns in GUARDED.items():
            for column in columns:
                cursor.execute(f"DROP TRIGGER IF EXISTS {table}_no_replace_by_{column}")


class Migration(migrations.Migration):
    dependencies = [("ward", "0003_sessions_and_invitations")]
    operations = [
        migrations.AddField("user", "wrong_logins", models.PositiveIntegerField(default=0)),
        migrations.AddField(
            "unit", "second_factor", models.BooleanField("Members need a second factor", default=False)
        ),
        migrations.RunPython(forwards, backwards),
    ]
