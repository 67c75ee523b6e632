"""An emulated box: real circuit physics, parts, faults, an operator, and the real firmware on top, in virtual time."""
