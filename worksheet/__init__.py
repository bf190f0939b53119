"""The oxygen delivery worksheet: serial blood gases of an intensive-care unit, read as oxygen supply."""
