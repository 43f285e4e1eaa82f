"""Syntax, keys and single values: every kind of slip, each found where it is."""

import pytest

from tests.gateway.plantfile.rig import GOOD, edited, mistakes_of, only_mistake, plant_of


def test_the_rig_is_right() -> None:
    """The text all slips start from has none."""
    assert mistakes_of(GOOD) == ()


@pytest.mark.parametrize(
    ("old", "new", "line"),
    [
        ('name = "Rig"', 'name = "Rig', 2),
        ("[controller]", "[controller", 5),
        ("horizon = 10", "horizon 10", 6),
        ("locality = 1", "horizon = 2", 7),
        ("span = [0, 400]", "span = [0, 400", 23),
    ],
)
def test_broken_syntax_is_one_mistake_with_its_line(old: str, new: str, line: int) -> None:
    """Open strings, headers and arrays, a lost =, a key twice: nothing else can be looked at."""
    mistake = only_mistake(edited(old, new))
    assert (mistake.place, mistake.line, mistake.allowed[:6]) == ("", line, "TOML (")


def test_a_text_that_ends_too_early_is_found_at_its_end() -> None:
    """The decoder gives no line then."""
    assert only_mistake('a = """\n\nx').line == 3


@pytest.mark.parametrize(
    "text", ["a = " + "[" * 5000 + "]" * 5000, "a = " + "1" * 5000, "\0", "a = 2020-13-01"], ids=lambda text: text[:8]
)
def test_a_text_that_breaks_the_decoder_is_one_mistake(text: str) -> None:
    """Brackets thousands deep, numbers of thousands of digits, control characters, impossible dates."""
    assert only_mistake(text).allowed.startswith("TOML (")


@pytest.mark.parametrize(
    ("old", "new", "place", "suggestion"),
    [
        ("[panel]", "[pannel]", "pannel", "panel"),
        ("locality = 1", "locality = 1\nhorizn = 3", "controller.horizn", "horizon"),
        ("period =", "perod =", "plant.perod", "period"),
        ("physics =", "physic =", "kinds.oven.physic", "physics"),
        ("loss =", "los =", "kinds.oven.los", "loss"),
        ("span = [0, 400]", "spam = [0, 400]", "kinds.oven.signals.temperature.spam", "span"),
        ('kind = "oven"', 'knd = "oven"', "sections[1].knd", "kind"),
        ('kind = "wall"', 'kid = "wall"', "couplings[1].kid", "kind"),
        ("names =", "name =", "sections[1].name", "names"),
        ("along =", "alongg =", "couplings[1].alongg", "along"),
        ("conductance =", "conductence =", "couplings[1].conductence", "conductance"),
        ("endpoint =", "endpont =", "sites.bench.endpont", "endpoint"),
        ('"keep"', '{ ramp_too = "3 %", at = "1 %/s" }', "kinds.oven.signals.heater.safe_hold.ramp_too", "ramp_to"),
        (
            "price = 1",
            "price = 1\ninstrument = { noize = 1 }",
            "kinds.oven.signals.temperature.instrument.noize",
            "noise",
        ),
        ("locality = 1", "locality = 1\nweights = { outputs = 1 }", "controller.weights.outputs", "output"),
        ("locality = 1", "locality = 1\n[controller.cutoffs]\ngahter = 0.2", "controller.cutoffs.gahter", "gather"),
    ],
)
def test_an_unknown_key_brings_the_nearest_right_one(old: str, new: str, place: str, suggestion: str) -> None:
    """In every table; and the key it was meant to be is not called missing as well."""
    mistake = only_mistake(edited(old, new))
    assert (mistake.place, mistake.suggestion) == (place, suggestion)


@pytest.mark.parametrize(
    ("old", "new", "place"),
    [
        ('name = "Rig"\n', "", "plant.name"),
        ('period = "500 ms"\n', "", "plant.period"),
        ("horizon = 10\n", "", "controller.horizon"),
        ("locality = 1\n", "", "controller.locality"),
        ('watchdog = "2 s"\n', "", "panel.watchdog"),
        ('window = "500 ms"\n', "", "panel.window"),
        ('physics = "zone"\n', "", "kinds.oven.physics"),
        ('lag = "3 s"\n', "", "kinds.oven.lag"),
        ('role = "measured"\n', "", "kinds.oven.signals.temperature.role"),
        ('unit = "degC"\n', "", "kinds.oven.signals.temperature.unit"),
        ("span = [0, 400]\n", "", "kinds.oven.signals.temperature.span"),
        ('names = "oven-{1..3}"\n', "", "sections[1].names"),
        ('kind = "oven"\n', "", "sections[1].kind"),
        ('along = "oven-{1..3}"\n', "", "couplings[1].along"),
        ('kind = "wall"\n', "", "couplings[1].kind"),
        ('conductance = "4 W/K"\n', "", "couplings[1].conductance"),
        ('link = "opcua"\n', "", "sites.bench.link"),
        ('endpoint = "opc.tcp://127.0.0.1:4840"\n', "", "sites.bench.endpoint"),
        ('namespace = "urn:example:rig"\n', "", "sites.bench.namespace"),
        ('address = "{section}/{signal}"\n', "", "sites.bench.address"),
        ('safe_hold = "keep"', 'safe_hold = { ramp_to = "3 %" }', "kinds.oven.signals.heater.safe_hold.at"),
    ],
)
def test_a_missing_key_is_named(old: str, new: str, place: str) -> None:
    """With the line of the table it belongs to, and what it should say."""
    mistake = only_mistake(edited(old, new))
    assert (mistake.place, mistake.read) == (place, "nothing")
    assert mistake.line is not None


@pytest.mark.parametrize("table", ["plant", "controller", "kinds", "sections"])
def test_a_missing_table_is_named(table: str) -> None:
    """A file needs these four at least; an empty one lacks all of them."""
    assert table in {mistake.place for mistake in mistakes_of("")}


WRONG_VALUES = [
    ('name = "Rig"', "name = 5", "plant.name"),
    ('name = "Rig"', 'name = " "', "plant.name"),
    ('period = "500 ms"', "period = 500", "plant.period"),
    ('period = "500 ms"', 'period = "500 mm"', "plant.period"),
    ('period = "500 ms"', 'period = "0 ms"', "plant.period"),
    ('period = "500 ms"', 'period = "-1 s"', "plant.period"),
    ("horizon = 10", "horizon = 1", "controller.horizon"),
    ("horizon = 10", "horizon = 10.5", "controller.horizon"),
    ("horizon = 10", "horizon = 100000", "controller.horizon"),
    ("horizon = 10", f"horizon = 0x{'f' * 5000}", "controller.horizon"),
    ("horizon = 10", "horizon = true", "controller.horizon"),
    ("horizon = 10", 'horizon = "10"', "controller.horizon"),
    ("locality = 1", "locality = 0", "controller.locality"),
    ("locality = 1", "locality = 1\nrho = 0", "controller.rho"),
    ("locality = 1", "locality = 1\nrho = nan", "controller.rho"),
    ("locality = 1", "locality = 1\nrho = inf", "controller.rho"),
    ("locality = 1", f"locality = 1\nrho = 1{'0' * 400}", "controller.rho"),
    ("locality = 1", "locality = 1\nrelax = 2", "controller.relax"),
    ("locality = 1", "locality = 1\nwander = -0.1", "controller.wander"),
    ("locality = 1", "locality = 1\nmax_iterations = 0", "controller.max_iterations"),
    ("locality = 1", "locality = 1\ntolerance = 1.5", "controller.tolerance"),
    ("locality = 1", 'locality = 1\ntolerance = "2 cm"', "controller.tolerance"),
    ("locality = 1", "locality = 1\ntolerance = []", "controller.tolerance"),
    ("locality = 1", "locality = 1\nweights = { move = 0 }", "controller.weights.move"),
    ("locality = 1", "locality = 1\nweights = 3", "controller.weights"),
    ("locality = 1", "locality = 1\n[controller.cutoffs]\ngather = 1.2", "controller.cutoffs.gather"),
    ("[panel]", "[hold]\nlatch_after = 0\n[panel]", "hold.latch_after"),
    ("[panel]", "[bench]\nseed = -1\n[panel]", "bench.seed"),
    ("[panel]", '[bench]\nsubstep = "0 s"\n[panel]', "bench.substep"),
    ('physics = "zone"', "physics = 3", "kinds.oven.physics"),
    ('role = "measured"', 'role = "mesured"', "kinds.oven.signals.temperature.role"),
    ('role = "measured"', "role = []", "kinds.oven.signals.temperature.role"),
    ('unit = "degC"', 'unit = "dgeC"', "kinds.oven.signals.temperature.unit"),
    ("span = [0, 400]", "span = 400", "kinds.oven.signals.temperature.span"),
    ("span = [0, 400]", "span = [0, 200, 400]", "kinds.oven.signals.temperature.span"),
    ("span = [0, 400]", "span = [0, inf]", "kinds.oven.signals.temperature.span"),
    ("span = [0, 400]", 'span = [0, "hot"]', "kinds.oven.signals.temperature.span"),
    ("span = [0, 400]", "span = [false, 400]", "kinds.oven.signals.temperature.span"),
    ("target = 200", "target = nan", "kinds.oven.signals.temperature.target"),
    ("target = 200", 'target = "200"', "kinds.oven.signals.temperature.target"),
    ("price = 1", "price = -1", "kinds.oven.signals.temperature.price"),
    ("price = 1", 'price = "1"', "kinds.oven.signals.temperature.price"),
    ('safe_hold = "keep"', 'safe_hold = "kep"', "kinds.oven.signals.heater.safe_hold"),
    ('safe_hold = "keep"', "safe_hold = 3", "kinds.oven.signals.heater.safe_hold"),
    ("price = 1", "price = 1\ninstrument = 5", "kinds.oven.signals.temperature.instrument"),
    ("price = 1", 'price = 1\ninstrument = { lag = "-1 s" }', "kinds.oven.signals.temperature.instrument.lag"),
    ('names = "oven-{1..3}"', 'names = ["oven-1"]', "sections[1].names"),
    ('names = "oven-{1..3}"', 'names = "oven-{1..1000000}"', "sections[1].names"),
    ('names = "oven-{1..3}"', 'names = "oven {1..3}"', "sections[1].names"),
    ('along = "oven-{1..3}"', 'between = ["oven-1"]', "couplings[1].between"),
    ('along = "oven-{1..3}"', 'between = ["oven-1", 2]', "couplings[1].between"),
    ('link = "opcua"', 'link = "pigeon"', "sites.bench.link"),
    ("opc.tcp://127.0.0.1:4840", "http://127.0.0.1:4840", "sites.bench.endpoint"),
    ("opc.tcp://127.0.0.1:4840", "opc.tcp://127.0.0.1", "sites.bench.endpoint"),
    ("opc.tcp://127.0.0.1:4840", "opc.tcp://127.0.0.1:99999", "sites.bench.endpoint"),
    ("{section}/{signal}", "{signal}", "sites.bench.address"),
    ("{section}/{signal}", "{sektion}/{signal}", "sites.bench.address"),
    ("{section}/{signal}", "{section}/{signal}/{}", "sites.bench.address"),
    ("{section}/{signal}", "{section}/{signal", "sites.bench.address"),
    ("{section}/{signal}", "{section.__class__}/{signal}", "sites.bench.address"),
    ("{section}/{signal}", "{section:>99999}/{signal}", "sites.bench.address"),
    ('link = "opcua"', 'link = "opcua"\npanel_address = "panel"', "sites.bench.panel_address"),
    ('link = "opcua"', 'link = "opcua"\ninsecure = "yes"', "sites.bench.insecure"),
    ('link = "opcua"', 'link = "opcua"\nkind = "lab"', "sites.bench.kind"),
    ('link = "opcua"', 'link = "opcua"\noverrides = { oven-1.heater = "x" }', "sites.bench.overrides.oven-1"),
]


@pytest.mark.parametrize(("old", "new", "place"), WRONG_VALUES)
def test_a_wrong_value_is_named(old: str, new: str, place: str) -> None:
    """Wrong types, not finite, out of range, misspelled: exactly one mistake, at its key, on its line."""
    text = edited(old, new)
    mistake = only_mistake(text)
    key = place.rsplit(".", 1)[-1]
    assert mistake.place == place
    assert mistake.line is not None
    assert key in text.splitlines()[mistake.line - 1]


@pytest.mark.parametrize("table", ["hold", "bench"])
def test_a_value_where_a_table_belongs_is_named(table: str) -> None:
    """The rest of the file is still read."""
    mistake = only_mistake(f"{table} = 3\n{GOOD}")
    assert (mistake.place, mistake.line, mistake.allowed) == (table, 1, "a table")


@pytest.mark.parametrize("table", ["sections", "couplings"])
def test_a_value_where_an_array_of_tables_belongs_is_named(table: str) -> None:
    """One table, as in `[sections]`, is not an array of tables either."""
    mistakes = mistakes_of(f"[{table}]\nkind = 3")
    assert [mistake.allowed for mistake in mistakes if mistake.place == table] == ["an array of tables"]


def test_another_link_gets_a_clear_sentence() -> None:
    """Which link there is."""
    mistake = only_mistake(edited('link = "opcua"', 'link = "mqtt"'))
    assert mistake.allowed == '"opcua"; it is the only link there is so far'


def test_all_wrong_values_are_found_in_one_reading() -> None:
    """Slips in different tables, all at once."""
    text = GOOD
    places: set[str] = set()
    taken: set[str] = set()
    for old, new, place in WRONG_VALUES:
        if old in text and old not in taken and "\n" not in new:
            text, places = edited(old, new, text), places | {place}
            taken.add(old)
    assert len(places) > 15
    assert places <= {mistake.place for mistake in mistakes_of(text)}


def test_values_and_meaning_are_checked_in_one_reading() -> None:
    """A wrong type in one table doesn't hide a crossed limit in another, nor one beside it."""
    text = edited("horizon = 10", "horizon = 1.5")
    text = edited("soft = [50, 350]", "soft = [350, 50]", text)
    text = edited("price = 1", "price = -1", text)
    text = edited('along = "oven-{1..3}"', 'along = "oven-{1..4}"', text)
    assert [mistake.place for mistake in mistakes_of(text)] == [
        "controller.horizon",
        "kinds.oven.signals.temperature.soft",
        "kinds.oven.signals.temperature.price",
        "couplings[1].along",
    ]


def test_integers_are_numbers() -> None:
    """`price = 1` and `price = 1.0` are the same file."""
    assert plant_of(GOOD) == plant_of(edited("price = 1", "price = 1.0"))
