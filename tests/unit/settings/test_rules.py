"""Every refusal: one line of the example spoilt, one finding, on the right line."""

from __future__ import annotations

import tomllib

import pytest

from edgectl.settings import SiteFileError, parse_site
from edgectl.settings.checks import RULES
from edgectl.settings.parts import take_apart

# header, old text, new text, keys of the findings, something one of them says
FIELDS = [
    ("site", 'name = "C', 'name = "\\tC', ["site.name"], "control characters"),
    ("site", "name", "nam", ["site.nam", "site.name"], "did you mean `name`?"),
    ("server", '"opc.tcp', '"http', ["server.endpoint"], "opc.tcp://host"),
    ("server", "2.0", '"2.0"', ["server.read_timeout_s"], "a number above 0"),
    ("server", "2.0", "true", ["server.read_timeout_s"], "a number above 0"),
    ("server", "true", "1", ["server.allow_insecure", "server.security"], "true or false"),
    ("server", '"none"', '"Basic256Sha256"', ["server.security"], '"none"'),
    ("cycle", "10 ", "10.5 ", ["cycle.hold_limit"], "a whole number"),
    ("cycle", "10 ", "0 ", ["cycle.hold_limit"], "at least 1"),
    ("cycle", "20.0", "nan", ["cycle.budget_s"], "nan and inf are refused"),
    ("cycle", "900.0", "inf", ["cycle.restore_max_age_s"], "nan and inf are refused"),
    ("cycle", "900.0", "1e300", ["cycle.restore_max_age_s"], "between -1e+12 and 1e+12"),
    ("cycle", "900.0", "9" * 400, ["cycle.restore_max_age_s"], "a number above 0"),
    ("cycle", "900.0", "1979-05-27", ["cycle.restore_max_age_s"], "a number above 0"),
    ("cycle", "[cycle]", "[cycel]", ["cycel", "cycle"], "did you mean `cycle`?"),
    ("column", "0.70", "1.2", ["column.murphree_efficiency"], "at most 1"),
    ("column.trays", "0.6", "-inf", ["column.trays.tray_spacing_m"], "finite"),
    ("", "c = -36.785", "c = nan", ["column.component[1].antoine.c"], "finite"),
    ("", "[113.223971,", "[nan,", ["column.component[1].liquid_cp[1]"], "finite"),
    ("", "[113.223971, ", "[", ["column.component[1].liquid_cp[3]"], "a number"),
    (
        "",
        "critical_k = 512.5",
        "kritical_k = 1",
        [
            "column.component[1].heat_of_vaporisation.critical_k",
            "column.component[1].heat_of_vaporisation.kritical_k",
        ],
        "`critical_k`?",
    ),
    ("tags.FIC-2101", "feed_flow", "feedflow", ["tags.FIC-2101.role"], "reflux_flow"),
    ("tags.FIC-2101", "kg/h", "kg/hr", ["tags.FIC-2101.unit"], "kg/h, t/h"),
    ("tags.FIC-2101", "nsu=urn:edgectl:sim:C-2101", "ns=2", ["tags.FIC-2101.node"], "the URI"),
    (
        "tags.FIC-2101",
        "[tags.FIC-2101]",
        '[tags."FIC 2101"]',
        ['tags."FIC 2101"', "mv.FIC-2103.in_ratio_to", "dv.FEED.measured"],
        "rename it",
    ),
    ("mv.FIC-2103", "6500.0", "true", ["mv.FIC-2103.low"], "or the name of a tag"),
    ("mv.FIC-2103", "6500.0", "nan", ["mv.FIC-2103.low"], "finite"),
    ("mv.FIC-2103", "[1, 2]", "[]", ["mv.FIC-2103.automatic_modes"], "at least 1"),
    ("mv.FIC-2103", "[1, 2]", "[1, 2.5]", ["mv.FIC-2103.automatic_modes[2]"], "whole number"),
    ("planning", "[1.5, 1.0", "[1.5, 0.0", ["planning.grid_min[2]"], "above 0"),
    ("advisory", "nsu=urn:edgectl:sim:C-2101;", "", ["advisory.valid"], "nsu=<namespace URI>"),
]

RELATIONS = [
    ("", "low_k = 320.0", "low_k = 391.0", ["column.component[1].antoine.low_k"], "swapped"),
    ("tags.FIC-2101", "25000.0", "-1.0", ["tags.FIC-2101.low"], "below `high`"),
    ("mv.TIC-2107", "low = 97.0", "low = 104.0", ["mv.TIC-2107.low"], "below `high`"),
    (
        "cv.BOTTOMS",
        "high = 350.0",
        "high = 350\nlow = 400",
        ["cv.BOTTOMS.low", "cv.BOTTOMS.setpoint"],
        "below `high`",
    ),
    ("estimation", "= 0.30", "= 0.47", ["estimation.feed_composition_low"], "0.46"),
    ("estimation", "= 3000.0", "= 8000", ["estimation.tracking_duty_low_kw"], "7500"),
    ("server", "allow_insecure = true", "", ["server.security"], "never on a plant network"),
    ("server", "user =", 'password_file = "/run/p"\nuser =', ["server.password_file"], "not both"),
    ("server", "password_env", "#", ["server.user"], "never write it here"),
    ("server", 'user = "advisor"', "", ["server.user"], "the user the password belongs to"),
    ("cycle", "20.0", "28.0", ["cycle.budget_s"], "budget_s + journal_wait_s below"),
    ("cycle", "90.0", "59.0", ["cycle.validity_s"], "at least twice"),
    ("cycle", "900.0", "29", ["cycle.restore_max_age_s"], "at least `cycle.period_s`"),
    ("server", "2.0", "30.0", ["server.read_timeout_s"], "below `cycle.period_s`"),
    ("server", "write_timeout_s = 2", "write_timeout_s = 40", ["server.write_timeout_s"], "30"),
    ("advice", "300.0", "20.0", ["advice.interval_s", "advice.act_within_s"], "at least"),
    ("column", "feed_stage = 23", "feed_stage = 37", ["column.feed_stage"], "1 to 36"),
    ("column", '"water"', '"methanol"', ["column.component[2].name"], "a name of its own"),
    (
        "column",
        "drum_temperature_degc = 58.0",
        "drum_temperature_degc = 40.0",
        ["column.component[1].antoine", "column.component[2].antoine"],
        "313.15 K",
    ),
    ("column", "a = 10.14743", "a = 9.0", ["column.component[1].name"], "most volatile"),
    ("column", "c = -36.785", "c = -325.0", ["column.component[1].antoine.c"], "a pole"),
    (
        "column.trays",
        "net_area_m2 = 1.78",
        "net_area_m2 = 2.78",
        ["column.trays.net_area_m2", "column.trays.downcomer_area_m2"],
        "cross-section",
    ),
    (
        "column.trays",
        "weir_height_m = 0.05",
        "weir_height_m = 50",
        ["column.trays.weir_height_m"],
        "the tray spacing",
    ),
    (
        "operating_point",
        "= 0.9965",
        "= 0.3",
        ["operating_point.distillate_wt_fraction_light"],
        "above the feed's",
    ),
    (
        "operating_point",
        "= 0.0003",
        "= 0.4",
        ["operating_point.bottoms_wt_fraction_light"],
        "below the feed's",
    ),
    ("operating_point", "= 0.38", "= 0.5", ["operating_point.feed_wt_fraction_light"], "0.46"),
    ("operating_point", "18000.0", "180000.0", ["operating_point.feed_kg_h"], "tag FIC-2101"),
    ("operating_point", "105.0", "1.05", ["operating_point.drum_pressure_kpa"], "tag PIC-2111"),
    ("planning", "6.5, 11.5", "6.0, 11.5", ["planning.moves_at_min[2]"], "write 6.5"),
    ("planning", "6.5, 11.5", "11.5, 6.5", ["planning.moves_at_min[3]"], "later"),
    ("planning", "41.5]", "121.5]", ["planning.moves_at_min[5]"], "101.5"),
    ("tags.TI-2102", "degC", "kPa", ["tags.TI-2102.unit"], "temperature: degC"),
    ("tags.FIC-2101", "kg/h", "m3/h", ["tags.FIC-2101.unit", "mv.FIC-2103.in_ratio_to"], ": kg/h"),
    ("tags.FIC-2105", "kg/h", "t/h", ["tags.FIC-2105.unit"], "for role distillate_flow: kg/h"),
    ("tags.PIC-2111", "kPa", "bar", ["tags.PIC-2111.unit"], "for role top_pressure: kPa"),
    ("tags.AI-2115.analyser", "420.0", "7200.0", ["tags.AI-2115.analyser.delay_s"], "at most 2400"),
    ("dv.FEED", "filter_min = 1.0", "", ["dv.FEED.filter_min"], "needed for feed_flow"),
    (
        "dv.FEED-TEMPERATURE",
        'kind = "feed_temperature"',
        'kind = "feed_temperature"\nfilter_min = 2.0',
        ["dv.FEED-TEMPERATURE.filter_min"],
        "not for feed_temperature",
    ),
    ("tags.FIC-2101", 'basis = "mass"', "", ["tags.FIC-2101.basis"], "alone does not say"),
    ("tags.FIC-2106", '"mass"', '"mole"', ["tags.FIC-2106.basis"], '"mass"'),
    ("tags.PIC-2111", 'basis = "absolute"', "", ["tags.PIC-2111.basis"], '"absolute"'),
    ("tags.PIC-2111", '"absolute"', '"gauge"', ["tags.PIC-2111.basis"], "not converted"),
    ("tags.AI-2115", 'basis = "mass"', "", ["tags.AI-2115.basis"], '"mass"'),
    (
        "tags.AI-2116",
        'unit = "wt ppm"\nbasis = "mass"',
        'unit = "%"',
        ["tags.AI-2116.basis", "cv.BOTTOMS.measured"],
        'write basis = "mass"',
    ),
    (
        "tags.PDI-2112",
        'unit = "kPa"',
        'unit = "kPa"\nbasis = "gauge"',
        ["tags.PDI-2112.basis"],
        "remove it",
    ),
    (
        "tags.FIC-2106",
        "bottoms_flow",
        "feed_flow",
        ["tags.FIC-2106.role", "tags.FIC-2106.required"],
        "tag FIC-2101 has it",
    ),
    ("tags.LIC-2114", "sump_level", "drum_level", ["tags.LIC-2114.role"], "tag LIC-2113 has it"),
    (
        "tags.FIC-2105",
        "distillate_flow",
        "bottoms_flow",
        ["tags", "tags.FIC-2106.role"],
        'role = "distillate_flow"',
    ),
    (
        "tags.FIC-2101",
        "required = true",
        "required = true\nsubstitute = 1",
        ["tags.FIC-2101.substitute"],
        "no substitute where required",
    ),
    (
        "tags.TI-2102",
        "substitute = 65.0",
        "substitute = 650.0",
        ["tags.TI-2102.substitute"],
        "0 to 120 degC",
    ),
    ("tags.FIC-2105", "required = true", "", ["tags.FIC-2105.required"], "required = true"),
    ("tags.FIC-2101", "stale_after_s = 60.0", "", ["tags.FIC-2101.stale_after_s"], "needed"),
    (
        "tags.AI-2115",
        "high = 2.0",
        "high = 2.0\nstale_after_s = 9",
        ["tags.AI-2115.stale_after_s"],
        "not for role analyser",
    ),
    ("tags.TI-2108", "stage = 8\n", "", ["tags.TI-2108.stage"], "needed for role"),
    ("tags.FIC-2106", "low = 0.0", "low = 0.0\nstage = 8", ["tags.FIC-2106.stage"], "not for"),
    (
        "tags.LIC-2113",
        "[tags.LIC-2114]",
        "[tags.LIC-2113.analyser]\ncycle_s = 9\ndelay_s = 9\n"
        "detection_limit = 1\nrepeat_limit = 3\n[tags.LIC-2114]",
        ["tags.LIC-2113.analyser"],
        "not for role drum_level",
    ),
    ("tags.AI-2115.analyser", "0.005", "5.0", ["tags.AI-2115.analyser.detection_limit"], "0 to 2"),
    ("tags.TI-2108", "stage = 8\n", "stage = 38\n", ["tags.TI-2108.stage"], "37 (reboiler)"),
    ("mv.TIC-2107.loop", "stage = 30", "stage = 38", ["mv.TIC-2107.loop.stage"], "TI-2107, 30"),
    ("mv.TIC-2107.loop", "stage = 30", "stage = 29", ["mv.TIC-2107.loop.stage"], "TI-2107, 30"),
    ("tags.FIC-2106", "s=FIC-2106.PV", "s=FIC-2105.PV", ["tags.FIC-2106.node"], "copied"),
    ("mv.FIC-2103", '"REFLUX-SP"', '"REFLUX-PS"', ["mv.FIC-2103.position"], "`REFLUX-SP`?"),
    ("mv.FIC-2103", '"REFLUX-SP"', '"REFLUX-OP"', ["mv.FIC-2103.position"], "loop_setpoint"),
    (
        "mv.FIC-2103",
        '"REFLUX-SP"',
        '"TRAY30-SP"',
        ["mv.FIC-2103.position", "mv.TIC-2107.position"],
        "make the units the",
    ),
    ("mv.FIC-2103", 'd = "FIC-2103"', 'd = "FIC-2101"', ["mv.FIC-2103.measured"], "reflux_flow"),
    ("mv.FIC-2103", '"REFLUX-OP"', '"REFLUX-MODE"', ["mv.FIC-2103.output"], "loop_output"),
    ("mv.FIC-2103", '"REFLUX-MODE"', '"REFLUX-OP"', ["mv.FIC-2103.mode"], "loop_mode"),
    ("mv.FIC-2103", '"FIC-2101"', '"FIC-2105"', ["mv.FIC-2103.in_ratio_to"], "feed_flow"),
    (
        "tags.ADVICE-ON",
        "required = true",
        "required = false",
        ["tags.ADVICE-ON.required"],
        "switch",
    ),
    ("tags.REFLUX-SP", "required = true", "required = false", ["mv.FIC-2103.position"], "required"),
    ("tags.TRAY30-MODE", "required = true", "required = false", ["mv.TIC-2107.mode"], "required"),
    ("mv.FIC-2103", "[1, 2]", "[1, 1]", ["mv.FIC-2103.automatic_modes[2]"], "each mode once"),
    ("mv.FIC-2103", "[1, 2]", "[1, 7]", ["mv.FIC-2103.automatic_modes[2]"], "0 to 2"),
    ("mv.FIC-2103", "ratio_filter_min = 5.0", "", ["mv.FIC-2103.ratio_filter_min"], "or neither"),
    (
        "mv.TIC-2107",
        "price = 0.0",
        'in_ratio_to = "FIC-2101"',
        ["mv.TIC-2107.in_ratio_to", "mv.TIC-2107.in_ratio_to", "mv.TIC-2107.ratio_filter_min"],
        "not for",
    ),
    (
        "mv.FIC-2103",
        "[mv.TIC-2107]",
        "[mv.FIC-2103.loop]\nstage = 3\ngain_kw_per_k = 1\nreset_min = 1\n[mv.TIC-2107]",
        ["mv.FIC-2103.loop"],
        "not for reflux",
    ),
    (
        "mv.FIC-2103",
        '"reflux"',
        '"tray_temperature_setpoint"',
        ["mv.FIC-2103.loop", "mv.FIC-2103.in_ratio_to", "mv.FIC-2103.measured", "mv.TIC-2107.kind"],
        "each kind",
    ),
    ("mv.TIC-2107", '"TRAY30-OP"', '"REFLUX-OP"', ["mv.TIC-2107.output"], "MV FIC-2103 has it"),
    ("mv.TIC-2107", '"TRAY30-MODE"', '"REFLUX-MODE"', ["mv.TIC-2107.mode"], "was it copied?"),
    ("mv.FIC-2103", "20.0", "90.0", ["mv.FIC-2103.increment"], "worthwhile_move"),
    ("mv.FIC-2103", "80.0", "210.0", ["mv.FIC-2103.worthwhile_move"], "max_move"),
    ("mv.FIC-2103", "200.0", "3001.0", ["mv.FIC-2103.max_move"], "3000"),
    ("mv.FIC-2103", "9500.0", "15001", ["mv.FIC-2103.high"], "tag REFLUX-SP, 0 to 15000"),
    ("mv.FIC-2103", "9500.0", '"FIC-2106"', ["mv.FIC-2103.high"], "a tag with role limit"),
    ("mv.FIC-2103", "9500.0", '"REFLUX-MIX"', ["mv.FIC-2103.high"], "the name of a tag"),
    ("cv.BOTTOMS", "500.0", "5001.0", ["cv.BOTTOMS.hard_high"], "tag AI-2116, 0 to 5000"),
    ("cv.BOTTOMS", '"wt ppm"', '"wt %"', ["cv.BOTTOMS.measured"], "make the units the same"),
    ("cv.BOTTOMS", '"AI-2116"', '"TI-2107"', ["cv.BOTTOMS.measured"], "role analyser"),
    ("cv.TRAY30", '"tracking"', '"quality"', ["cv.TRAY30.role"], '"tracking" for'),
    ("cv.TRAY30", '"tracking"', '"tracking"\nhigh = 104', ["cv.TRAY30.high"], "not for role"),
    ("cv.BOTTOMS", '"quality"', '"tracking"', ["cv.BOTTOMS.role"], '"quality" for'),
    ("cv.DISTILLATE", "\nhigh = 0.40", "", ["cv.DISTILLATE.high"], "at least one of"),
    ("cv.BOTTOMS", "weight = 1.0", "", ["cv.BOTTOMS.weight"], "above 0 with a setpoint"),
    ("cv.DISTILLATE", "weight = 0.0", "weight = 1.0", ["cv.DISTILLATE.weight"], "0 without"),
    (
        "cv.BOTTOMS",
        '"logarithmic"\nrole = "quality"\nhard_high = 500.0',
        '"linear"\nrole = "quality"\ninnovation_clp = 1',
        ["cv.BOTTOMS.innovation_clp"],
        "clip`?",
    ),
    ("cv.BOTTOMS", "high = 350.0", "high = 510.0", ["cv.BOTTOMS.high"], "at most `hard_high`"),
    ("cv.BOTTOMS", "setpoint = 150.0", "setpoint = 400.0", ["cv.BOTTOMS.setpoint"], "at most"),
    (
        "cv.BOTTOMS",
        "high = 350.0",
        "high = 350\nlow = 9\nhard_low = 20",
        ["cv.BOTTOMS.low"],
        "at least `hard_low`",
    ),
    ("cv.BOTTOMS", "high = 350.0", "high = 350\nlow = 0", ["cv.BOTTOMS.low"], "above 0 in a log"),
    ("dv.FEED", '"FIC-2101"', '"FIC-2103"', ["dv.FEED.measured"], "role feed_flow"),
    ("dv.FEED", '"FIC-2101"', '"FEED"', ["dv.FEED.measured"], "the name of a tag"),
    ("tags.TI-2102", "substitute = 65.0", "", ["dv.FEED-TEMPERATURE.measured"], "or has a subst"),
    (
        "dv.FEED-TEMPERATURE",
        '"TI-2102"\nkind = "feed_temperature"',
        '"FIC-2101"\nkind = "feed_flow"',
        ["dv.FEED-TEMPERATURE.kind"],
        "each kind of DV once",
    ),
    ("advisory", "s=ADV.valid", "s=TI-2107.PV", ["advisory.valid"], "read as tag TI-2107"),
    ("advisory", "s=ADV.cycle", "s=FIC-2103.SP", ["advisory.cycle"], "setpoint of MV FIC-2103"),
    ("advisory", "s=ADV.cycle", "s=FIC-2103.MODE", ["advisory.cycle"], "mode of MV FIC-2103"),
    (
        "advisory",
        "urn:edgectl:sim:C-2101;s=ADV.cycle",
        "urn:edgectl:sim:C%2d2101;s=TIC-2107.SP",
        ["advisory.cycle"],
        "setpoint of MV TIC-2107",
    ),
    ("advisory", "s=ADV.valid_until", "s=ADV.valid", ["advisory.valid_until"], "`advisory.valid`"),
    (
        "advisory.moves.FIC-2103",
        "s=ADV.FIC-2103.target",
        "s=ADV.valid",
        ["advisory.moves.FIC-2103.target"],
        "`advisory.valid`",
    ),
    (
        "advisory",
        "nsu=urn:edgectl:sim:C-2101;s=ADV.valid",
        "nsu=http://opcfoundation.org/UA/;i=1",
        ["advisory.valid"],
        "the server itself",
    ),
    (
        "",
        "[advisory.moves.FIC-2103]",
        "[advisory.moves.FIC-2130]",
        ["advisory.moves.FIC-2130", "advisory.moves.FIC-2103"],
        "`FIC-2103`?",
    ),
]


def spoil(text: str, header: str, old: str, new: str) -> str:
    start = 0 if not header else text.index(f"\n[{header}]") + 1
    at = text.index(old, start)
    return text[:at] + new + text[at + len(old) :]


@pytest.mark.parametrize(("header", "old", "new", "keys", "says"), [*FIELDS, *RELATIONS])
def test_one_mistake_is_named_where_it_is(
    whole: str, header: str, old: str, new: str, keys: list[str], says: str
) -> None:
    text = spoil(whole, header, old, new)
    with pytest.raises(SiteFileError) as caught:
        parse_site(text, "site.toml")
    findings = caught.value.findings
    assert sorted(finding.key for finding in findings) == sorted(keys), str(caught.value)
    assert any(says in f"{finding.allowed} {finding.mend}" for finding in findings)
    lines = text.splitlines()
    for finding in findings:
        assert finding.line is not None
        leaf = finding.key.rsplit(".", 1)[-1].split("[")[0].strip('"')
        line = lines[finding.line - 1]
        missing = finding.value == "(missing)"
        where = line.startswith("[") or "= {" in line or finding.line == 1
        assert leaf in line or (missing and where), line


def test_every_rule_refuses_something(whole: str) -> None:
    silent = {rule.__name__ for rule in RULES}
    for header, old, new, _, _ in RELATIONS:
        parts, _ = take_apart(tomllib.loads(spoil(whole, header, old, new)))
        silent -= {rule.__name__ for rule in RULES if any(rule(parts))}
    assert not silent


def test_no_rule_complains_about_the_example(whole: str) -> None:
    parts, complaints = take_apart(tomllib.loads(whole))
    assert not complaints
    assert not [complaint for rule in RULES for complaint in rule(parts)]
