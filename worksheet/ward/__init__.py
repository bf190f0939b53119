"""What is stored: units, beds, patients, stays, entries, corrections, audit, and who may see what."""
