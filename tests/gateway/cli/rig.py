"""A small plant file of three tanks on disk, and commands run in this process as a shell would run them."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import pytest

from gateway.cli import main

PLANT = """\
[plant]
name = "Three Tanks"
period = "500 ms"

[controller]
horizon = 8
locality = 1

[panel]
watchdog = "2 s"
window = "500 ms"

[kinds.tank]
physics = "tank"
area = "40 cm^2"
rim = "38 cm"
outlet_bore = "6 mm"
discharge = 0.61
pump_capacity = "70 cm^3/s"
pump_lag = "2 s"
pump_minimum = "8 %"

[kinds.tank.signals.level]
role = "measured"
unit = "cm"
span = [0, 40]
soft = [4, 36]
target = 20
price = 1
instrument = { noise = "0.02 cm", resolution = "0.001 cm" }

[kinds.tank.signals.pump]
role = "driven"
unit = "%"
span = [0, 100]
hard = [0, 100]
rate = "20 %/s"
move_price = 0.3
safe_hold = { ramp_to = "30 %", at = "10 %/s" }

[[sections]]
names = "tank-{1..3}"
kind = "tank"

[[couplings]]
along = "tank-{1..3}"
kind = "tube"
bore = "3 mm"
length = "300 mm"

[sites.bench]
link = "opcua"
endpoint = "opc.tcp://127.0.0.1:1"
namespace = "urn:lengthsman:test"
address = "{section}/{signal}"

[sites.live]
link = "opcua"
endpoint = "opc.tcp://127.0.0.1:1"
namespace = "urn:example:panel"
address = "TT.{section}.{signal}"
panel_address = "TT.Panel.{signal}"
insecure = true
"""


def plant_file(folder: Path, text: str = PLANT) -> Path:
    """Write the plant file."""
    path = folder / "three.toml"
    path.write_text(text, encoding="utf-8")
    return path


@dataclass(frozen=True)
class Ended:
    """How a command ended: its exit code and what it said."""

    code: int
    out: str
    err: str


def lengthsman(capsys: pytest.CaptureFixture[str], *arguments: object) -> Ended:
    """Run `lengthsman ARGUMENTS` in this process."""
    with pytest.raises(SystemExit) as caught:
        main([str(argument) for argument in arguments])
    said = capsys.readouterr()
    assert isinstance(caught.value.code, int)
    return Ended(caught.value.code, said.out, said.err)
