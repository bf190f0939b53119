"""Entries, review marks and the audit trail can only grow: the database itself refuses UPDATE and DELETE."""

from typing import Any

from django.db import migrations

TABLES = ("ward_entry", "ward_reviewmark", "ward_auditevent")

SQLITE = """
CREATE TRIGGER {table}_no_update BEFORE UPDATE ON {table}
BEGIN SELECT RAISE(ABORT, '{table} is append-only'); END;
CREATE TRIGGER {table}_no_delete BEFORE DELETE ON {table}
BEGIN SELECT RAISE(ABORT, '{table} is append-only'); END;
CREATE TRIGGER {table}_no_replace BEFORE INSERT ON {table}
WHEN NEW.id IS NOT NULL AND EXISTS (SELECT 1 FROM {table} WHERE id = NEW.id)
BEGIN SELECT RAISE(ABORT, '{table} is append-only'); END;
"""

POSTGRES = """
CREATE TRIGGER {table}_append_only BEFORE UPDATE OR DELETE ON {table}
FOR EACH ROW EXECUTE FUNCTION worksheet_append_only();
CREATE TRIGGER {table}_no_truncate BEFORE TRUNCATE ON {table}
FOR EACH STATEMENT EXECUTE FUNCTION worksheet_append_only();
"""

FUNCTION = """
CREATE OR REPLACE FUNCTION worksheet_append_only() RETURNS trigger LANGUAGE plpgsql AS $$
BEGIN RAISE EXCEPTION '% is append-only', TG_TABLE_NAME USING ERRCODE = 'restrict_violation'; END $$;
"""


def _run(schema_editor: Any, script: list[str]) -> None:
    # One statement at a time: SQLite triggers hold a semicolon inside, so split after END; or ();
    with schema_editor.connection.cursor() as cursor:
        for statement in script:
            cursor.execute(statement)


def forwards(apps: Any, schema_editor: Any) -> None:
    """Add the triggers."""
    vendor = schema_editor.connection.vendor
    if vendor == "postgresql":
        _run(schema_editor, [FUNCTION])
    for table in TABLES:
        text = (POSTGRES if vendor == "postgresql" else SQLITE).format(table=table)
        _run(schema_editor, ["CREATE TRIGGER" + part for part in text.split("CREATE TRIGGER")[1:]])


def backwards(apps: Any, schema_editor: Any) -> None:
    """Take the triggers away."""
    vendor = schema_editor.connection.vendor
    for table in TABLES:
        if vendor == "postgresql":
            names = [f"{table}_append_only ON {table}", f"{table}_no_truncate ON {table}"]
        else:
            names = [f"{table}_no_update", f"{table}_no_delete", f"{table}_no_replace"]
        _run(schema_editor, [f"DROP TRIGGER IF EXISTS {name}" for name in names])


class Migration(migrations.Migration):
    dependencies = [("ward", "0001_initial")]
    operations = [migrations.RunPython(forwards, backwards)]
