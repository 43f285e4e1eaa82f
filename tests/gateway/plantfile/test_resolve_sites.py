"""Sites: where signals lead."""

import pytest

from gateway.plantfile.plant import SiteKind, SiteSpec
from gateway.plantfile.resolve_sites import PANEL_SIGNALS, SECTION_BITS
from gateway.tags import IN_CHARGE, PANEL_READ, PANEL_WRITTEN
from tests.gateway.plantfile.rig import GOOD, edited, only_mistake, plant_of

LIVE = edited("[sites.bench]", "[sites.plant-a]")


def site(text: str) -> SiteSpec:
    """Return the one site of a text."""
    (found,) = plant_of(text).sites.values()
    return found


def test_a_site_called_bench_is_a_bench_any_other_is_live() -> None:
    """So that nobody takes the real plant for a simulated one by leaving a word out."""
    assert (site(GOOD).kind, site(LIVE).kind) == (SiteKind.BENCH, SiteKind.LIVE)


@pytest.mark.parametrize("text", [GOOD, LIVE])
def test_a_site_may_say_its_kind(text: str) -> None:
    """Whatever it is called."""
    kinds = [site(edited('link = "opcua"', f'link = "opcua"\nkind = "{kind}"', text)).kind for kind in SiteKind]
    assert kinds == list(SiteKind)


def test_only_a_bench_is_insecure_unless_told() -> None:
    """A live site must say it in words."""
    assert (site(GOOD).insecure, site(LIVE).insecure) == (True, False)
    assert site(edited('link = "opcua"', 'link = "opcua"\ninsecure = true', LIVE)).insecure


def test_addresses_follow_the_pattern() -> None:
    """And the panel's take the section's place unless they have a pattern of their own."""
    assert site(GOOD).address_of("oven-1", "heater") == "oven-1/heater"
    assert site(GOOD).panel_address_of("permit") == "panel/permit"
    own = edited('link = "opcua"', 'link = "opcua"\npanel_address = "P.{signal}"')
    assert site(own).panel_address_of("permit") == "P.permit"


@pytest.mark.parametrize(
    ("tag", "section", "signal"), [("oven-1.heater", "oven-1", "heater"), ("oven-2.in_charge", "oven-2", "in_charge")]
)
def test_an_override_replaces_one_address(tag: str, section: str, signal: str) -> None:
    """Of a signal or of a section's bit at the panel."""
    found = site(edited('link = "opcua"', f'link = "opcua"\noverrides = {{ "{tag}" = "X" }}'))
    assert (found.address_of(section, signal), found.address_of("oven-3", signal)) == ("X", f"oven-3/{signal}")


def test_an_override_replaces_one_of_the_panel_s_addresses() -> None:
    """The panel's own signals are tags too."""
    found = site(edited('link = "opcua"', 'link = "opcua"\noverrides = { "panel.permit" = "X" }'))
    assert found.panel_address_of("permit") == "X"


@pytest.mark.parametrize(
    ("tag", "suggestion"),
    [("oven-1.heatr", "oven-1.heater"), ("oven1.heater", "oven-1.heater"), ("panel.permitt", "panel.permit")],
)
def test_an_override_of_nothing_brings_the_nearest_tag(tag: str, suggestion: str) -> None:
    """It would be silently without effect."""
    mistake = only_mistake(edited('link = "opcua"', f'link = "opcua"\noverrides = {{ "{tag}" = "X" }}'))
    assert (mistake.place, mistake.suggestion) == (f'sites.bench.overrides."{tag}"', suggestion)


@pytest.mark.parametrize(
    ("line", "place"),
    [
        ('overrides = { "oven-1.heater" = "oven-2/heater" }', "sites.bench.overrides"),
        ('overrides = { "oven-1.heater" = "X", "oven-2.heater" = "X" }', "sites.bench.overrides"),
        (
            'panel_address = "oven-1/{signal}"\noverrides = { "oven-1.heater" = "oven-1/permit" }',
            "sites.bench.overrides",
        ),
    ],
)
def test_two_signals_at_one_address_are_refused(line: str, place: str) -> None:
    """What is written to one would move the other."""
    assert only_mistake(edited('link = "opcua"', f'link = "opcua"\n{line}')).place == place


def test_without_a_panel_nothing_of_it_has_an_address() -> None:
    """An override would be silently without effect."""
    text = edited('[panel]\nwatchdog = "2 s"\nwindow = "500 ms"\n', "")
    mistake = only_mistake(edited('link = "opcua"', 'link = "opcua"\noverrides = { "panel.permit" = "X" }', text))
    assert mistake.place == 'sites.bench.overrides."panel.permit"'


def test_the_panel_s_signals_are_those_the_link_carries() -> None:
    """Two lists, one truth."""
    assert set(PANEL_SIGNALS) == {*PANEL_READ, *PANEL_WRITTEN}
    assert SECTION_BITS == (IN_CHARGE,)


def test_a_deadline_is_a_part_of_the_period_unless_given() -> None:
    """Every call on the wire ends inside its period."""
    assert site(GOOD).call_timeout_s == pytest.approx(0.2)
    assert site(edited('period = "500 ms"', 'period = "20 ms"')).call_timeout_s == pytest.approx(0.008)
    assert site(edited('link = "opcua"', 'link = "opcua"\ncall_timeout = "100 ms"')).call_timeout_s == 0.1


def test_a_deadline_as_long_as_the_period_is_refused() -> None:
    """It would outlive its period."""
    mistake = only_mistake(edited('link = "opcua"', 'link = "opcua"\ncall_timeout = "500 ms"'))
    assert mistake.place == "sites.bench.call_timeout"
