"""Reading what is written on a capacitor, step by step.

words.py         the text made uniform, and the numbers in it
capacitance.py   what says farads: units, IEC 60062 letters, three-digit codes
voltage.py       what says volts: rated, test, alternating; two-character codes
tolerance.py     per cents and letters
dielectric.py    words for what is inside, and what they imply
tokens.py        the whole text cut into these
reading.py       the tokens put together into one reading, or refused with the readings to choose from
"""
