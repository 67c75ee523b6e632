"""From converter codes to volts and amperes, and from those to what a part is: pure functions of arrays."""
