"""What a process takes for one request: processor time and memory, as Linux counts them in /proc."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path

TICK_S = 1.0 / os.sysconf("SC_CLK_TCK")
MIB = 2.0**20

RESET_PEAK = "5"
"""What proc(5) asks to be written to clear_refs, so that VmHWM begins anew at what is resident."""


@dataclass(frozen=True)
class Watched:
    """A process of this machine, by its number."""

    pid: int

    @property
    def cpu_s(self) -> float:
        """Processor time of all its threads since it began, in steps of `TICK_S`."""
        # the name in brackets may hold blanks; fields 14 and 15 of proc(5) come 11 behind it
        fields = self._file("stat").read_text().rpartition(")")[2].split()
        return (int(fields[11]) + int(fields[12])) * TICK_S

    @property
    def resident_mib(self) -> float:
        """Memory that is resident now."""
        return self._status("VmRSS")

    @property
    def peak_mib(self) -> float:
        """The most memory that was resident since `forget_peak`."""
        return self._status("VmHWM")

    def forget_peak(self) -> None:
        """Let the peak begin anew at what is resident now."""
        self._file("clear_refs").write_text(RESET_PEAK)

    def _status(self, name: str) -> float:
        lines = self._file("status").read_text().splitlines()
        (told,) = (line.split()[1] for line in lines if line.startswith(f"{name}:"))
        return int(told) * 1024 / MIB

    def _file(self, name: str) -> Path:
        return Path(f"/proc/{self.pid}/{name}")
