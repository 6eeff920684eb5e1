"""Time runs: generated code, stepper, dead-time history, scans and events."""
