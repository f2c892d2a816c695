"""Alarms: their states after IEC 62682 / ISA-18.2, what may happen to them, and how the whole of them is doing."""
