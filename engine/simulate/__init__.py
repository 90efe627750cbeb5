"""An invented department with known truth, to show and to measure the program on."""

from engine.simulate.department import Department, invent, write_department

__all__ = ["Department", "invent", "write_department"]
