"""Without the magnet: closed-form fields and a simulated bench."""
