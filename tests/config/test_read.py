from __future__ import annotations

import math
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

from spheru.config.read import read_settings, settings_from_mapping
from spheru.errors import ConfigError, DataError
from spheru.material.dosage import active_sites, particle_density
from spheru.nuclei.placement import Clustered, Faces
from spheru.thermal.history import Hold, Quench, Ramp

CONFIGS = sorted((Path(__file__).parents[2] / "configs").glob("*.toml"))

PP = '[material]\nname = "isotactic-polypropylene-alpha"\n'
PLLA = '[material]\nname = "poly-l-lactide"\n'
COOL = '[cooling]\nstart = "205 degC"\nsteps = [{ rate = "10 K/min", until = "40 degC" }]\n'
SECTION = '[sample]\nview = "section"\nsize = ["1 mm", "2 mm"]\npixel = "2 um"\n'
AGENT = (
    '[[nuclei]]\nlaw = "agent"\ndose = "1000 ppm"\nactive = 0.01\nactivation = "20 K"\n'
    'particle = { d50_volume = "1 um", spread = 1.6, density = "2750 kg/m^3" }\n'
)


def made(*, material=PP, cooling=COOL, nuclei="", sample=SECTION, top="", folder=Path()):
    text = f"{top}\n{material}\n{cooling}\n{nuclei}\n{sample}"
    return settings_from_mapping(tomllib.loads(text), folder=folder)


def faults(**parts):
    with pytest.raises(ConfigError) as fault:
        made(**parts)
    return [str(found) for found in fault.value.faults]


def steps(*texts, start="205 degC"):
    return f'[cooling]\nstart = "{start}"\nsteps = [{", ".join(texts)}]\n'


def sample(text):
    return f"[sample]\n{text}\n"


def nuclei(text):
    return f"[[nuclei]]\n{text}\n"


# ---------------------------------------------------------------- what is read


def test_settings_of_a_simple_file(tmp_path):
    path = tmp_path / "run.toml"
    path.write_text(f"seed = 7\n{PP}\n{COOL}\n{SECTION}")
    settings = read_settings(path)
    assert (settings.title, settings.seed) == ("run", 7)
    assert settings.sample.size == (0.002, 0.001)  # y, x
    assert (settings.sample.pixel, settings.sample.pixels_across) == (2e-6, None)
    assert settings.sample.edges == ("periodic", "periodic")
    assert settings.history.segments == (Ramp.until(start=478.15, end=313.15, rate=10 / 60),)
    assert [source.name for source in settings.sources] == ["background"]
    assert settings.sources[0].activation.law == settings.material.sites


def test_steps_follow_one_another():
    settings = made(
        cooling=steps(
            '{ rate = "60 K/min", until = "130 degC" }',
            '{ hold = "5 min" }',
            '{ rate = "-10 K/min", for = "1 min" }',
            '{ quench = "40 degC", time_constant = "3 s", for = "60 s" }',
        )
    )
    ramp, hold, heating, quench = settings.history.segments
    assert ramp.end == 403.15
    assert hold == Hold(temperature=403.15, duration=300.0)
    assert heating.end == pytest.approx(413.15)
    assert quench == Quench(start=heating.end, target=313.15, time_constant=3.0, duration=60.0)


def test_trace_stands_in_place_of_steps(tmp_path):
    (tmp_path / "thermocouple.csv").write_text("time_min,temperature_C\n0,205\n10,105\n")
    settings = made(cooling='[cooling]\ntrace = "thermocouple.csv"\n', folder=tmp_path)
    assert settings.history.duration == 600.0
    assert settings.history.end_temperature == pytest.approx(378.15)
    assert settings.document["cooling"] == {"trace": "trace.csv"}
    assert settings.attachments == {"trace.csv": b"time_min,temperature_C\n0,205\n10,105\n"}


def test_override_of_one_value_is_marked_as_the_users():
    settings = made(material=f'{PP}[material.growth]\nmobility_energy = "6300 J/mol"\n')
    assert settings.material.growth.u_star == 6300.0
    assert settings.material.growth.branches[0].g0 == 283.0
    assert settings.material.provenance["growth.mobility_energy"].mark == "user"
    assert settings.material.provenance["growth.branches[0].prefactor"].mark == "memory"


def test_override_by_another_law_replaces_the_table():
    settings = made(material=f'{PP}[material.sites]\nlaw = "fixed"\nnumber = "3e12 1/m^3"\n')
    assert settings.sources[0].activation.law.number == 3e12


def test_pressure_moves_the_melting_temperature():
    # 0.275 K/MPa on 10 MPa - 0.1 MPa: 2.7225 K
    settings = made(material=f'{PP}pressure = "10 MPa"\n')
    assert settings.material.t_m0 == pytest.approx(483.15 + 0.275 * 9.9)
    assert settings.sources[0].activation.t_m0 == settings.material.t_m0


def test_agent_by_particles():
    settings = made(nuclei=AGENT)
    particles = particle_density(
        1e-3, d50=1e-6, spread=1.6, basis="volume", particle_density=2750.0,
        polymer_density=settings.material.density_melt,
    )  # fmt: skip
    background, agent = settings.sources
    assert (background.name, agent.name) == ("background", "agent")
    assert agent.activation.law.number == active_sites(particles, active=0.01)
    assert (agent.activation.law.activation, agent.activation.law.spread) == (20.0, 0.0)


def test_dose_of_nothing_is_a_reference_case():
    assert made(nuclei=AGENT.replace("1000", "0")).sources[1].activation.law.number == 0.0


def test_agent_with_spread_and_clusters():
    text = AGENT.replace('"20 K"', '{ mean = "20 K", spread = "2 K" }')
    text += 'cluster = { mean_number = 20, radius = "5 um" }\n'
    settings = made(nuclei=text)
    assert settings.sources[1].activation.law.spread == 2.0
    assert settings.sources[1].placement == Clustered(mean_number=20, radius=5e-6)
    assert settings.clustered == ("agent",)


def test_agent_that_dissolves():
    # (1000 - 800) ppm * 1e10 per ppm
    settings = made(
        nuclei=nuclei(
            'law = "agent"\ndose = "1000 ppm"\nsites_per_ppm = "1e10 1/m^3"\n'
            'threshold = "800 ppm"\nactivation = "20 K"'
        )
    )
    assert settings.sources[1].activation.law.number == pytest.approx(2e12)


def test_sources_of_one_law_are_numbered_and_the_background_comes_first():
    fixed = nuclei('law = "fixed"\ndensity = "1e12 1/m^3"')
    settings = made(nuclei=fixed + fixed + AGENT + nuclei('law = "material"\nfactor = 2.0'))
    names = [source.name for source in settings.sources]
    assert names == ["background", "fixed 1", "fixed 2", "agent"]
    assert settings.sources[0].activation.factor == 2.0


def test_background_can_be_left_out():
    settings = made(
        material=f"{PP}background = false\n",
        nuclei=nuclei('law = "exponential"\na = "0.1 1/K"\nb = 15.0\nceiling = "1e15 1/m^3"'),
    )
    assert [source.name for source in settings.sources] == ["exponential"]
    assert settings.sources[0].activation.law.b == 15.0


def test_classical_nuclei_take_what_the_record_knows():
    settings = made(nuclei=nuclei('law = "classical"\nprefactor = "1e30 1/(m^3 s)"'))
    law = settings.sources[1].activation.law
    assert (law.sigma, law.sigma_e, law.u_star) == (0.0115, 0.065, 6270.0)
    assert law.heat_of_fusion_volume == pytest.approx(207e3 * 936)
    assert settings.sources[1].name == "homogeneous"


def test_substrate_nuclei_start_at_random():
    settings = made(
        nuclei=nuclei(
            'law = "substrate"\ndensity = "1e13 1/m^3"\nprefactor = "1e6 1/s"\nshape = "sphere"\n'
            'contact_angle = "60 deg"\nparticle_radius = "50 nm"'
        )
    )
    activation = settings.sources[1].activation
    assert activation.number == 1e13
    assert activation.law.contact_angle == pytest.approx(math.pi / 3)


def test_table_of_sites_comes_from_a_file_and_is_written_out(tmp_path):
    (tmp_path / "sites.csv").write_text("undercooling_K,density [1/mm^3]\n60,10\n80,1000\n")
    settings = made(nuclei=nuclei('law = "table"\nfile = "sites.csv"'), folder=tmp_path)
    assert settings.sources[1].activation.law.number == pytest.approx((1e10, 1e12))
    kept = settings.document["nuclei"][0]
    assert kept["undercooling"] == ["60.0 K", "80.0 K"]
    assert "file" not in kept


def test_film_is_closed_across_z():
    settings = made(
        sample=sample(
            'view = "film"\nthickness = "30 um"\nsize = ["1 mm", "2 mm"]\npixel = "1 um"\n'
            'edges = "cut"'
        ),
        nuclei=nuclei('law = "surface"\non = ["z-low"]\ndensity = "1e9 1/m^2"'),
    )
    assert settings.sample.edges == ("closed", "cut", "cut")
    assert settings.sample.size == (30e-6, 0.002, 0.001)
    assert settings.sources[1].placement == Faces(faces=(("z", "low"),))
    assert settings.sample.sight == "mid"


def test_edges_axis_by_axis():
    settings = made(
        sample=sample(
            'view = "block"\nsize = ["10 um", "20 um", "30 um"]\npixel = "1 um"\n'
            'edges = { x = "cut", z = "closed" }'
        )
    )
    assert settings.sample.size == (30e-6, 20e-6, 10e-6)
    assert settings.sample.edges == ("closed", "periodic", "cut")


MEMORY = '[memory]\nslope = "0.2 1/K"\nerase_temperature = "215 degC"\ntime = "60 s"\n'


def test_melt_memory_multiplies_the_melts_own_sites_only():
    settings = made(
        cooling=steps('{ hold = "1 min" }', '{ rate = "10 K/min", until = "40 degC" }')
        + MEMORY
        + '[induction]\ntime = "1e9 s"\nexponent = 4\n',
        nuclei=AGENT,
    )
    # 10 K short of erasing, held for one time constant: 1 + (exp(2) - 1)/e
    assert settings.sources[0].activation.factor == pytest.approx(1 + math.expm1(2) / math.e)
    assert settings.sources[1].activation.factor == 1.0
    assert (settings.induction.time, settings.induction.exponent) == (1e9, 4)


def test_record_of_the_user_is_attached_under_a_fixed_name(tmp_path):
    text = Path(CONFIGS[0].parents[1] / "spheru/material/library/poly-l-lactide.toml").read_text()
    (tmp_path / "our-grade.toml").write_text(text)
    settings = made(
        material='[material]\nfile = "our-grade.toml"\n',
        nuclei=nuclei('law = "fixed"\ndensity = "1e12 1/m^3"'),
        folder=tmp_path,
    )
    assert settings.document["material"] == {"file": "material.toml"}
    assert settings.attachments == {"material.toml": text.encode()}


@pytest.mark.parametrize("path", CONFIGS, ids=lambda path: path.stem)
def test_every_shipped_settings_file_reads(path):
    settings = read_settings(path)
    assert settings.title != path.stem  # it has a title of its own
    assert path.read_text(encoding="utf-8").startswith("# ")


def test_there_are_settings_for_every_view_but_the_plane():
    assert {read_settings(path).sample.view for path in CONFIGS} == {"section", "block", "film"}


# ---------------------------------------------------------------- what is refused

BLOCK = sample('view = "block"\nsize = ["9 um", "9 um", "9 um"]\npixel = "1 um"')
TABLE = [
    pytest.param({"top": "titel = 'x'"}, "titel: unknown key; did you mean 'title'?", id="top"),
    pytest.param({"top": "seed = 1.5"}, "seed: expected a whole number, got 1.5", id="seed"),
    pytest.param(
        {"top": "seed = -1"}, "seed: expected a number of at least 0, got -1", id="negative-seed"
    ),
    pytest.param(
        {"material": PP.replace("alpha", "alfa")},
        "material.name: unknown material 'isotactic-polypropylene-alfa'; did you mean "
        "'isotactic-polypropylene-alpha'?",
        id="material",
    ),
    pytest.param({"material": "[material]\n"}, "material.name: is missing; expected", id="none"),
    pytest.param(
        {"material": f'{PP}file = "a.toml"\n'}, "material.name: stands beside file", id="both"
    ),
    pytest.param(
        {"material": '[material]\nname = "a.toml"\n'}, "material.name: expected a shipped record",
        id="file-as-name",
    ),
    pytest.param(
        {"material": '[material]\nfile = "none.toml"\n'},
        "material.file: none.toml: there is no such file",
        id="no-such-record",
    ),
    pytest.param(
        {"material": f"{PP}presure = '1 MPa'\n"},
        "material.presure: unknown key; did you mean 'pressure'?",
        id="misspelt-pressure",
    ),
    pytest.param(
        {"material": f'{PP}pressure = "500 MPa"\n'}, "material.pressure: record", id="pressure"
    ),
    pytest.param(
        {"material": f'{PP}[material.growth]\nmobility_enrgy = "6 kJ/mol"\n'},
        "material.growth.mobility_enrgy: unknown key; did you mean 'mobility_energy'?",
        id="misspelt-override",
    ),
    pytest.param(
        {"material": f'{PP}[material.growth]\nlaw = "bell"\n'},
        "material.growth.maximum: is missing; expected a growth rate above 0 such as '10 um/min'",
        id="override-of-the-law",
    ),
    pytest.param(
        {"material": f'{PP}[material.transitions]\nglass = "300 degC"\n'},
        "material: record isotactic-polypropylene-alpha: expected glass transition",
        id="contradiction",
    ),
    pytest.param(
        {"material": PLLA},
        "nuclei: the record 'poly-l-lactide' has no site law (usual are 1e11 to 1e13 per m3); give "
        'one measured on your grade, for example [[nuclei]] law = "fixed" density = "1e12 1/m^3"',
        id="no-sites",
    ),
    pytest.param(
        {"material": PLLA, "nuclei": nuclei('law = "material"')},
        "nuclei[0].law: the record 'poly-l-lactide' has no site law",
        id="no-sites-but-listed",
    ),
    pytest.param(
        {"material": f"{PP}background = false\n"},
        "nuclei: expected at least one [[nuclei]], since background = false",
        id="no-nuclei",
    ),
    pytest.param(
        {"material": f"{PP}background = false\n", "nuclei": nuclei('law = "material"')},
        "material.background: is false, but nuclei[0] asks for",
        id="background-contradiction",
    ),
    pytest.param(
        {"nuclei": nuclei('law = "material"') * 2}, "nuclei[1]: the record's own", id="twice"
    ),
    pytest.param(
        {"nuclei": nuclei('law = "agnt"')},
        "nuclei[0].law: expected one of material, fixed, exponential, table, classical, substrate, "
        "surface, agent, got 'agnt'; did you mean 'agent'?",
        id="law",
    ),
    pytest.param(
        {"nuclei": nuclei('density = "1 1/m^3"')}, "nuclei[0].law: is missing; expected one of",
        id="no-law",
    ),
    pytest.param(
        {"nuclei": nuclei('law = "fixed"\ndensity = 1e12')},
        "nuclei[0].density: expected a number per volume like '1e12 1/m^3', got 1000000000000.0; a "
        "number needs its unit, in quotes",
        id="bare-number",
    ),
    pytest.param(
        {"nuclei": AGENT.replace("1000 ppm", "-5 ppm")},
        "nuclei[0].dose: expected a share from 0 to 100 % such as '1000 ppm', got '-5 ppm'",
        id="negative-dose",
    ),
    pytest.param(
        {"nuclei": AGENT.replace("1000 ppm", "120 %")},
        "nuclei[0].dose: expected a share from 0 to 100 %",
        id="dose-above-all",
    ),
    pytest.param(
        {"nuclei": AGENT.replace('"1000 ppm"', "0.001")},
        "nuclei[0].dose: expected a share like '1000 ppm', got 0.001; a number needs its unit",
        id="bare-dose",
    ),
    pytest.param(
        {"nuclei": AGENT.replace("0.01", "1.5")},
        "nuclei[0].active: expected a number of at most 1, got 1.5",
        id="active",
    ),
    pytest.param(
        {"nuclei": AGENT.replace("active = 0.01\n", "")},
        "nuclei[0].active: is missing; an agent of particles needs it",
        id="no-active",
    ),
    pytest.param(
        {"nuclei": AGENT + 'loss = 0.1\ncluster = { mean_number = 5, radius = "5 um" }\n'},
        "nuclei[0].cluster: stands beside loss; both describe the same agglomerates",
        id="loss-and-cluster",
    ),
    pytest.param(
        {"nuclei": AGENT.replace("spread", 'd50_number = "1 um", spread')},
        "nuclei[0].particle.d50_number: stands beside d50_volume",
        id="two-medians",
    ),
    pytest.param(
        {"nuclei": AGENT.replace('"20 K"', '"20 degC"')},
        "nuclei[0].activation: expected a temperature difference like '20 K', got '20 degC'",
        id="activation-on-a-scale",
    ),
    pytest.param(
        {"nuclei": AGENT + 'sites_per_ppm = "1 1/m^3"\n'},
        "nuclei[0].particle: does not go with sites_per_ppm",
        id="particles-and-dissolving",
    ),
    pytest.param(
        {"nuclei": nuclei('law = "surface"\non = ["z-low"]\ndensity = "1 1/m^2"')},
        "nuclei[0].on: nuclei on faces need",
        id="no-faces",
    ),
    pytest.param(
        {"nuclei": nuclei('law = "surface"\non = ["z-lo"]\ndensity = "1 1/m^2"')},
        "nuclei[0].on[0]: expected one of z-low, z-high, got 'z-lo'; did you mean 'z-low'?",
        id="face",
    ),
    pytest.param(
        {"nuclei": nuclei('law = "classical"\nprefactor = "1 1/(m^3 s)"\nshape = "sphere"\n'
                          'fold_surface_energy = "1 J/m^2"')},
        'nuclei[0].fold_surface_energy: does not go with shape = "sphere"',
        id="sphere-with-folds",
    ),
    pytest.param(
        {"nuclei": nuclei('law = "table"\nfile = "none.csv"')},
        "nuclei[0].file: none.csv: there is no such file",
        id="no-such-table",
    ),
    pytest.param(
        {"material": f'{PP}[material.growth]\nlaw = "table"\nfile = "none.csv"\n'},
        "material.growth.file: none.csv: there is no such file",
        id="no-such-growth-table",
    ),
    pytest.param(
        {"nuclei": nuclei('law = "table"\nundercooling = ["9 K", "8 K"]\n'
                          'density = ["1 1/m^3", "2 1/m^3"]')},
        "nuclei[0]: site table",
        id="falling-table",
    ),
    pytest.param(
        {"cooling": '[cooling]\nstart = "205 degC"\n'},
        "cooling.steps: is missing; expected start and steps, or a trace",
        id="no-steps",
    ),
    pytest.param(
        {"cooling": f'{COOL}trace = "a.csv"\n'}, "cooling.start: stands beside trace", id="trace"
    ),
    pytest.param(
        {"cooling": '[cooling]\ntrace = "none.csv"\n'},
        "cooling.trace: none.csv: there is no such file",
        id="no-such-trace",
    ),
    pytest.param(
        {"cooling": steps()}, "cooling.steps: expected a list of at least 1, got 0", id="empty"
    ),
    pytest.param(
        {"cooling": steps('{ rtae = "10 K/min", until = "40 degC" }')},
        "cooling.steps[0].rtae: unknown key; did you mean 'rate'?",
        id="misspelt-rate",
    ),
    pytest.param(
        {"cooling": steps('{ rate = "10 C", until = "40 degC" }')},
        "cooling.steps[0].rate: expected a rate like '10 K/min', got '10 C'",
        id="dimension",
    ),
    pytest.param(
        {"cooling": steps('{ rate = "10 K/min", until = "220 degC" }')},
        "cooling.steps[0].until: 220 degC lies above the 205 degC reached before; write a negative "
        "rate to heat",
        id="heating-by-a-positive-rate",
    ),
    pytest.param(
        {"cooling": steps('{ rate = "-10 K/min", until = "40 degC" }')},
        "cooling.steps[0].until: 40 degC lies below the 205 degC reached before; write a positive "
        "rate to cool",
        id="cooling-by-a-negative-rate",
    ),
    pytest.param(
        {"cooling": steps('{ rate = "0 K/min", until = "40 degC" }')},
        "cooling.steps[0].rate: expected a rate other than 0",
        id="no-rate",
    ),
    pytest.param(
        {"cooling": steps('{ rate = "10 K/min" }')},
        'cooling.steps[0]: expected until = "40 degC" or for = "5 min" beside rate',
        id="no-end",
    ),
    pytest.param(
        {"cooling": steps('{ rate = "10 K/s", for = "5 min" }')},
        "cooling.steps[0].for: ramp, end: expected an absolute temperature above 0 K",
        id="below-absolute-zero",
    ),
    pytest.param(
        {"cooling": steps('{ hold = "-5 min" }')},
        "cooling.steps[0].hold: expected a time above 0 such as '5 min', got '-5 min'",
        id="negative-hold",
    ),
    pytest.param(
        {"sample": sample('view = "sektion"\nspherulites = 9')},
        "sample.view: expected one of section, block, film, plane, got 'sektion'; did you mean "
        "'section'?",
        id="view",
    ),
    pytest.param(
        {"sample": sample('view = "section"')}, "sample.size: is missing; expected", id="no-size"
    ),
    pytest.param(
        {"sample": SECTION + "spherulites = 1000\n"},
        "sample.size: stands beside spherulites",
        id="size-and-spherulites",
    ),
    pytest.param(
        {"sample": SECTION + "pixels_across = 25\n"},
        "sample.pixel: stands beside pixels_across; leave one of them out",
        id="pixel-and-pixels-across",
    ),
    pytest.param(
        {"sample": SECTION.replace("2 um", "-1 um")},
        "sample.pixel: expected a length above 0 such as '1 um', got '-1 um'",
        id="negative-pixel",
    ),
    pytest.param(
        {"sample": SECTION.replace("2 um", "1.5 mm")},
        "sample.pixel: got 1500 um; expected a pixel no larger than sample.size[0] of 1000 um",
        id="pixel-larger-than-the-window",
    ),
    pytest.param(
        {"sample": SECTION.replace('"2 mm"', '"2 mm", "3 mm"')},
        "sample.size: expected 2 lengths (x, y) for a section, got 3",
        id="too-many-axes",
    ),
    pytest.param(
        {"sample": BLOCK.replace(', "9 um"]', "]")},
        "sample.size: expected 3 lengths (x, y, z) for a block, got 2",
        id="too-few-axes",
    ),
    pytest.param(
        {"sample": SECTION.replace("section", "film")},
        "sample.thickness: is missing; a film needs one like '30 um'",
        id="film-without-thickness",
    ),
    pytest.param(
        {"sample": SECTION.replace("section", "plane")},
        "sample.thickness: is missing; a plane needs one like '30 um'",
        id="plane-without-thickness",
    ),
    pytest.param(
        {"sample": SECTION + 'thickness = "30 um"\n'},
        "sample.thickness: a section has none",
        id="section-with-thickness",
    ),
    pytest.param(
        {"sample": SECTION + 'sight = "mid"\n'}, "sample.sight: belongs to a film", id="sight"
    ),
    pytest.param(
        {"sample": SECTION + 'edges = "perodic"\n'},
        "sample.edges: expected one of periodic, cut, closed, got 'perodic'; did you mean "
        "'periodic'?",
        id="edges",
    ),
    pytest.param(
        {"sample": SECTION + 'edges = { z = "cut" }\n'},
        "sample.edges.z: a section has the axes x and y; leave z out",
        id="z-of-a-section",
    ),
    pytest.param(
        {"cooling": COOL + MEMORY.replace("215", "900")},
        "memory: melt memory: expected a melt near the erase temperature",
        id="memory",
    ),
    pytest.param(
        {"cooling": COOL + '[induction]\ntime = "1 s"\nexponent = 0\n'},
        "induction.exponent: expected a number above 0, got 0",
        id="induction",
    ),
]  # fmt: skip


@pytest.mark.parametrize(("parts", "message"), TABLE)
def test_fault_names_the_key_and_what_to_do(parts, message):
    found = faults(**parts)
    assert any(line.startswith(message) for line in found), found
    assert all("\n" not in line for line in found)


def test_one_fault_gives_one_line():
    for case in TABLE:
        parts, _ = case.values
        if case.id in ("trace", "override-of-the-law", "particles-and-dissolving", "none"):
            continue
        assert len(faults(**parts)) == 1, (case.id, faults(**parts))


def test_all_faults_of_a_file_come_at_once(tmp_path):
    path = tmp_path / "run.toml"
    path.write_text(
        "seed = true\n"
        '[material]\nname = "isotactic-polypropylene-alpha"\n'
        "[material.body]\ncrystallinity = 1.2\n"
        '[cooling]\nstart = "205 degC"\n'
        'steps = [{ rate = "10 K/min", until = "40 degC" }, { hold = "5 min" },'
        ' { rate = "1,5 K/min", until = "20 degC" }]\n'
        '[[nuclei]]\nlaw = "fixed"\ndensty = "1e12 1/m^3"\n'
        '[sample]\nview = "film"\nsize = ["1 mm", "1 mm"]\nspherulites = 10\n'
    )
    with pytest.raises(ConfigError) as fault:
        read_settings(path)
    lines = str(fault.value).splitlines()
    assert lines[0] == f"{path}: 6 faults"
    assert [line.split(":")[0].strip() for line in lines[1:]] == [
        "seed",
        "cooling.steps[2].rate",
        "nuclei[0].densty",
        "material.body.crystallinity",
        "sample.size",
        "sample.thickness",
    ]


def test_faults_of_the_steps_come_all_at_once():
    found = faults(
        cooling=steps(
            '{ rate = "10 K/min", until = "220 degC" }',
            '{ rate = "-10 K/min", until = "40 degC" }',
            '{ rate = "10 K/min" }',
        )
    )
    assert [line.split(":")[0] for line in found] == [
        "cooling.steps[0].until",
        "cooling.steps[1].until",
        "cooling.steps[2]",
    ]


def test_a_fault_of_one_key_does_not_hide_those_of_its_neighbours():
    found = faults(
        cooling=steps(
            '{ hold = "5" }',
            '{ rate = "10 K/min", until = "150 degC" }',
            '{ rate = "10 K/min", until = "160 degC" }',
            '{ rate = "10 C", until = "140 degC" }',
            '{ rate = "10 K/min" }',
        ),
        nuclei=nuclei('law = "agnt"') + AGENT.replace("d50_volume", "d50"),
        sample=sample('view = "film"\npixel = "-1 um"\npixels_across = 25\nsigt = "mid"'),
    )
    assert [line.split(":")[0] for line in found] == [
        "cooling.steps[0].hold",
        "cooling.steps[3].rate",
        "nuclei[0].law",
        "nuclei[1].particle.d50",
        "sample.pixel",
        "sample.sigt",
        "cooling.steps[2].until",
        "cooling.steps[4]",
        "sample.size",
        "sample.pixel",
        "sample.thickness",
    ]


@pytest.mark.parametrize("key", ["material", "cooling", "nuclei", "sample", "memory", "induction"])
@pytest.mark.parametrize("value", [3, "x", [1], True, [[]]], ids=repr)
def test_wrong_kinds_are_refused_by_name(key, value):
    document = tomllib.loads(PP + COOL + SECTION) | {key: value}
    with pytest.raises(ConfigError) as fault:
        settings_from_mapping(document)
    assert any(found.where.startswith(key) for found in fault.value.faults)


@pytest.mark.parametrize("key", ["material", "cooling", "sample"])
def test_missing_table_is_named(key):
    document = tomllib.loads(PP + COOL + SECTION)
    del document[key]
    with pytest.raises(ConfigError, match=f"{key}: is missing; expected a table"):
        settings_from_mapping(document)


def test_effects_that_the_site_law_contains_are_not_added():
    material = f'{PP}[material.sites]\nincludes = ["melt memory", "induction"]\n'
    cooling = f'{COOL}{MEMORY}[induction]\ntime = "1 s"\nexponent = 4\n'
    found = faults(material=material, cooling=cooling)
    assert [line.split(":")[0] for line in found] == ["memory", "induction"]
    assert all("would count twice" in line for line in found)
    other = material.replace("[material.sites]", "background = false\n[material.sites]")
    fixed = nuclei('law = "fixed"\ndensity = "1e12 1/m^3"')
    assert made(material=other, cooling=cooling, nuclei=fixed).induction is not None


def test_file_at_fault_gives_one_clear_line(tmp_path):
    path = tmp_path / "run.toml"
    with pytest.raises(DataError, match="there is no such file"):
        read_settings(path)
    with pytest.raises(DataError, match="expected a file, found a folder"):
        read_settings(tmp_path)
    path.write_bytes(b'title = "\xff"')
    with pytest.raises(DataError, match="row 1: expected text in UTF-8"):
        read_settings(path)
    path.write_text("seed = \n")
    with pytest.raises(ConfigError, match=r"no valid TOML: .*line 1, column 8") as fault:
        read_settings(path)
    assert str(fault.value).startswith(f"{path}: 1 fault\n")


def test_fault_in_a_record_of_the_user_names_its_file(tmp_path):
    text = Path(CONFIGS[0].parents[1] / "spheru/material/library/poly-l-lactide.toml").read_text()
    (tmp_path / "our.toml").write_text(text.replace('"480 K"', '"480"', 1))
    (found,) = faults(material='[material]\nfile = "our.toml"\n', folder=tmp_path)
    assert found.startswith(
        "material.file (our.toml): transitions.equilibrium_melting: expected a temperature"
    )
    (tmp_path / "our.toml").write_text("name = \n")
    (found,) = faults(material='[material]\nfile = "our.toml"\n', folder=tmp_path)
    assert found.startswith("material.file: no valid TOML")


def test_reading_needs_no_heavy_library():
    code = (
        "import sys; from spheru.config.read import read_settings; "
        f"read_settings({str(CONFIGS[0])!r}); "
        "heavy = {'scipy', 'numba', 'matplotlib', 'pint', 'skimage'}; "
        "print(sorted(heavy & set(sys.modules)))"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True,
        cwd=CONFIGS[0].parents[1],
    )  # fmt: skip
    assert done.stdout == "[]\n"
