"""Firmware of the bench box: pure logic, except the board files and the chip drivers."""

VERSION = "0.1.0"
