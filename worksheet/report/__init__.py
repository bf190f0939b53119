"""The PDF: the timeline of one patient and the one-page review of a unit."""
