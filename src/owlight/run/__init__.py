"""The loop: stays at points until the plan has nothing more to ask, and the safe state on every way out."""
