"""The plant file: one TOML text that says what the plant is, what is wanted of it, and where its signals lead.

    text --parse--> tables --resolve--> Plant --canonical--> bytes for the fingerprint

- `document` reads syntax, keys and single values (`tables`, `fields`); `resolve_*` read what only shows between values.
- Both write to one `Ledger`, so that one reading finds every mistake; nothing starts on a file with a mistake.
- What a tank or a tube is comes from the physics (`catalogue`); the reader knows neither.
- Units: text quantities are converted here (`units`) and nowhere else. Signals stay in their own engineering unit,
  parameters become SI, times become seconds.
"""

from gateway.plantfile.canonical import canonical
from gateway.plantfile.cautions import warnings_of
from gateway.plantfile.mistakes import Mistake, PlantFileError
from gateway.plantfile.plant import Plant
from gateway.plantfile.read import read_plant, read_plant_text

__all__ = ["Mistake", "Plant", "PlantFileError", "canonical", "read_plant", "read_plant_text", "warnings_of"]
