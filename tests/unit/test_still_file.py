"""Still files: what they mean as a `Still`, and every class of fault with its line."""

from __future__ import annotations

from dataclasses import fields
from pathlib import Path

import pytest

from stillfield.errors import RunFileError, StillfieldError
from stillfield.physics.cover import MATERIALS
from stillfield.physics.still import STANDARD_CONDITIONS, Condition, CoverMaterial, Panel, Still
from stillfield.settings.still_file import StillKeys, load_still_file

STILLS = Path(__file__).parents[2] / "config" / "stills"

#: Three sound lines; a test appends its own from line 4 on.
SOUND = """\
name: plain
panels: [{share: 1, tilt_deg: 15}]
cover: {material: glass}
"""


@pytest.fixture
def load(tmp_path):
    def load_text(text):
        (tmp_path / "still.yaml").write_text(text)
        return load_still_file(tmp_path / "still.yaml", given="still.yaml")

    return load_text


def faults(load, text):
    with pytest.raises(RunFileError) as caught:
        load(text)
    assert str(caught.value).startswith("still.yaml has ")
    return [str(fault) for fault in caught.value.faults]


def test_the_shortest_file_has_the_defaults_of_the_record(load):
    assert load(SOUND) == Still("plain", (Panel(1.0, 15.0),), cover=MATERIALS["glass"])


def test_every_number_of_a_still_can_be_set_in_its_file():
    keys = set(StillKeys.model_fields) - {"band", "cost", "modification"} | {"condition_low", "condition_high"}
    assert keys == {field.name for field in fields(Still)}


def test_all_keys_arrive(load):
    still = load(
        """\
name: full
panels:
  - {share: 0.25, tilt_deg: 10, azimuth_deg: 90, azimuth_from: north}
  - {share: 0.75, tilt_deg: 20, azimuth_deg: 270, azimuth_from: north}
cover: {material: custom, refractive_index: 1.5, extinction_per_m: 10, thickness_m: 0.003, emittance: 0.8, ageing: 0.9}
wall_gain: 0.25
brine_depth_m: 0.1
liner_heat_capacity_j_m2_k: 5000
water_emittance: 0.96
feed_salinity_g_kg: 35
concentration_factor: 2
condition: weathered
band: [neglected, maintained]
conditions:
  weathered: {absorptance: 0.5, loss_w_m2_k: 3, leak: 0.15}
  new: {leak: 0.01}
heat_transfer: moist-air
"""
    )
    assert still == Still(
        name="full", panels=(Panel(0.25, 10.0, 90.0, "north"), Panel(0.75, 20.0, 270.0, "north")),
        cover=CoverMaterial(1.5, 10.0, 0.003, 0.8, 0.9), wall_gain=0.25, brine_depth_m=0.1,
        liner_heat_capacity_j_m2_k=5000.0, water_emittance=0.96, feed_salinity_g_kg=35.0, concentration_factor=2.0,
        condition="weathered", condition_low="neglected", condition_high="maintained", heat_transfer="moist-air",
        conditions={
            **STANDARD_CONDITIONS, "weathered": Condition(0.5, 3.0, 0.15), "new": Condition(0.74, 1.0, 0.01),
        },
    )  # fmt: skip


def test_a_named_sheet_can_be_thinner_or_older(load):
    cover = load(SOUND.replace("glass}", "polyethylene-film, thickness_m: 0.0002, ageing: 0.8}")).cover
    named = MATERIALS["polyethylene-film"]
    assert (cover.thickness_m, cover.ageing) == (0.0002, 0.8)
    assert (cover.refractive_index, cover.extinction_per_m, cover.emittance) == (
        named.refractive_index, named.extinction_per_m, named.emittance,
    )


@pytest.mark.parametrize("material", sorted(MATERIALS))
def test_every_named_sheet_can_be_chosen(load, material):
    assert load(SOUND.replace("glass", material)).cover == MATERIALS[material]


def test_the_band_without_words_reaches_down_to_the_condition(load):
    usual, poor = load(SOUND), load(SOUND + "condition: neglected\n")
    assert (usual.condition_low, usual.condition_high) == ("weathered", "new")
    assert (poor.condition_low, poor.condition_high) == ("neglected", "new")


@pytest.mark.parametrize(
    ("lines", "expected"),
    [
        ("colour: red", "line 4, colour: unknown key (known here: name, panels, cover, wall_gain, brine_depth_m, "
                        "liner_heat_capacity_j_m2_k, water_emittance, feed_salinity_g_kg, concentration_factor, "
                        "condition, band, conditions, heat_transfer, cost, modification)"),
        ("brine_depth: 0.02", "line 4, brine_depth: unknown key (did you mean 'brine_depth_m'?)"),
        ("brine_depth_cm: 2", "line 4, brine_depth_cm: unknown key (did you mean 'brine_depth_m'?)"),
        ("tilt_deg: 15", "line 4, tilt_deg: unknown key here (did you mean 'panels.tilt_deg'?)"),
        ("brine_depth_m: 2", "line 4, brine_depth_m: should be between 0.005 and 0.5 (got 2)"),
        ("brine_depth_m: 2 cm", "line 4, brine_depth_m: should be a number between 0.005 and 0.5 (got the text '2 cm'; "
                                "write the number alone, in the unit of the key)"),
        ("wall_gain: '0,5'", "line 4, wall_gain: should be a number between 0 and 1 (got the text '0,5'; write 0.5)"),
        ("wall_gain: .inf", "line 4, wall_gain: should be between 0 and 1 (got inf)"),
        ("wall_gain: yes", "line 4, wall_gain: should be a number between 0 and 1 (got the text 'yes')"),
        ("wall_gain: 1:30", "line 4, wall_gain: should be a number between 0 and 1 (got the text '1:30'; "
                            "write the number alone, in the unit of the key)"),
        ("condition: maintaned", "line 4, condition: should be one of 'new', 'maintained', 'weathered', 'neglected' "
                                 "(got 'maintaned'; did you mean 'maintained'?)"),
        ("heat_transfer: dunkel", "line 4, heat_transfer: should be one of 'dunkle', 'moist-air' "
                                  "(got 'dunkel'; did you mean 'dunkle'?)"),
        ("band: []", "line 4, band: should be a list of 2 (got 0 items)"),
        ("band: [new]", "line 4, band: should be a list of 2 (got 1 item)"),
        ("band: [weathered, nwe]", "line 4, band (item 2): should be one of 'new', 'maintained', 'weathered', "
                                   "'neglected' (got 'nwe'; did you mean 'new'?)"),
        ("band: [new, weathered]", "line 4, band: should run from a worse to a better condition around 'maintained' "
                                   "(got [new, weathered]; from worst to best: neglected, weathered, maintained, new)"),
        ("condition: neglected\nband: [weathered, new]",
         "line 5, band: should run from a worse to a better condition around 'neglected' "
         "(got [weathered, new]; from worst to best: neglected, weathered, maintained, new)"),
        ("conditions:\n  new: {leek: 0}", "line 5, conditions.new.leek: unknown key (did you mean 'leak'?)"),
        ("conditions:\n  nwe: {leak: 0}", "line 5, conditions.nwe: unknown key (did you mean 'new'?)"),
        ("conditions: {new: {leak: 1}}", "line 4, conditions.new.leak: should be at least 0 and below 1 (got 1)"),
        ("feed_salinity_g_kg: 150\nconcentration_factor: 2",
         "line 5, concentration_factor: times feed_salinity_g_kg should be at most 200, the saltiest brine whose "
         "properties are known (got 300)"),
    ],
)  # fmt: skip
def test_each_fault_names_its_line_key_and_cure(load, lines, expected):
    assert faults(load, SOUND + lines + "\n") == [expected]


@pytest.mark.parametrize(
    ("old", "new", "expected"),
    [
        ("name: plain", "name: My Still",
         "line 1, name: should be small letters, digits and single hyphens (got 'My Still'; write 'my-still')"),
        ("name: plain", "name: ../up",
         "line 1, name: should be small letters, digits and single hyphens (got '../up'; write 'up')"),
        ("name: plain", "name: con",
         "line 1, name: should be small letters, digits and single hyphens (got 'con'; write 'run-con')"),
        ("name: plain", "name: é", "line 1, name: should be small letters, digits and single hyphens (got 'é')"),
        ("tilt_deg: 15", "tilt_deg: 95", "line 2, panels (item 1).tilt_deg: should be between 0 and 80 (got 95)"),
        (", tilt_deg: 15", "",
         "line 2, panels (item 1).tilt_deg: is missing: Tilt from horizontal [deg]; below 10 drops fall back"),
        ("share: 1", "share: 0", "line 2, panels (item 1).share: should be above 0 and at most 1 (got 0)"),
        ("share: 1", "share: 0.9", "line 2, panels: the shares should add up to 1 (got 0.9)"),
        ("[{share: 1, tilt_deg: 15}]", "{share: 1, tilt_deg: 15}",
         "line 2, panels: should be a list (got a group of keys)"),
        ("[{share: 1, tilt_deg: 15}]", "[]", "line 2, panels: should be a list of 1 to 12 (got 0 items)"),
        ("tilt_deg: 15", "tilt_deg: 15, azimuth_from: pole",
         "line 2, panels (item 1).azimuth_from: should be one of 'equator', 'north' (got 'pole')"),
        ("material: glass", "material: glas",
         "line 3, cover.material: should be one of 'low-iron-glass', 'glass', 'greenish-glass', 'polycarbonate', "
         "'acrylic', 'polyvinyl-fluoride-film', 'polyethylene-film', 'custom' (got 'glas'; did you mean 'glass'?)"),
        ("material: glass", "material: custom, thickness_m: 0.004",
         "line 3, cover: material 'custom' also needs refractive_index, extinction_per_m, emittance"),
        ("{material: glass}", "glass", "line 3, cover: should be a group of keys (got the text 'glass')"),
        ("cover: {material: glass}\n", "", "cover: is missing: Sheet of which all panels are made"),
    ],
)  # fmt: skip
def test_faults_in_what_every_still_needs(load, old, new, expected):
    assert old in SOUND
    assert faults(load, SOUND.replace(old, new)) == [expected]


def test_every_fault_is_told_at_once(load):
    text = """\
name: My Still
panels:
  - {share: 0.5, tilt_deg: 95}
  - {share: 0.4, tilt: 15}
cover: {material: glas}
brine_depth_m: 2 cm
brine_depth_m: 0.02
condition: newish
"""
    assert [fault.partition(":")[0] for fault in faults(load, text)] == [
        "line 1, name", "line 3, panels (item 1).tilt_deg", "line 4, panels (item 2).tilt_deg",
        "line 4, panels (item 2).tilt", "line 5, cover.material", "line 6, brine_depth_m",
        "line 7, brine_depth_m", "line 8, condition",
    ]  # fmt: skip


def test_a_still_file_that_is_not_there_is_told(tmp_path):
    with pytest.raises(StillfieldError, match=r"gone\.yaml: cannot be read \(got No such file or directory\)"):
        load_still_file(tmp_path / "gone.yaml", given="gone.yaml")


@pytest.mark.parametrize("path", sorted(STILLS.glob("*.yaml")), ids=lambda path: path.stem)
def test_shipped_designs_load_and_are_called_as_their_file(path):
    still = load_still_file(path)
    assert still.name == path.stem
    assert sum(panel.share for panel in still.panels) == pytest.approx(1.0)


@pytest.mark.parametrize("path", sorted(STILLS.glob("*.yaml")), ids=lambda path: path.stem)
def test_shipped_designs_state_every_key_and_its_range(path):
    text = path.read_text(encoding="utf-8")
    plain_keys = [key for key in StillKeys.model_fields if key not in ("conditions", "modification")]
    lines = text.splitlines()
    starts = {line.split(":")[0]: line for line in lines if not line.startswith(("#", " ", "-"))}
    assert set(plain_keys) <= set(starts)
    numbers = [line for key, line in starts.items() if key.endswith(("_m", "_k", "_kg", "factor", "emittance", "gain"))]
    assert all("#" in line and " to " in line for line in numbers)


def test_shipped_designs_have_the_depths_of_their_kind():
    """Household stills 1 to 5 cm of brine, large basins 10 to 20 cm (typical values, quoted from memory)."""
    depths = {path.stem: load_still_file(path).brine_depth_m for path in STILLS.glob("*.yaml")}
    assert 0.10 <= depths.pop("deep-basin") <= 0.20
    assert all(0.01 <= depth <= 0.05 for depth in depths.values())
    assert len(depths) >= 3
