"""How the bench is reached: HiSLIP and raw sockets from one engine, and the control port. Loopback only."""
