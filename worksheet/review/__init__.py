"""What people look at: unit review, patient page, entry form, levers."""
