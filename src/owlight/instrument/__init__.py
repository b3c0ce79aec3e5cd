"""Drivers over links: careful settings, fresh readings, records; the open bench with its power guard; safe state."""
