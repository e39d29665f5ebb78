"""One run: the only room where case, dynamics, diagnostics, thermometers and files meet."""
