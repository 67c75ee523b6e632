"""The wire's client: a core without I/O, schemas for every line, a thin link over pyserial, and the log of what passed."""
