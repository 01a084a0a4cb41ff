"""Slow and separate roads to the numbers of the material room."""

import math
import tomllib
from importlib import resources

import numpy as np

# factor to SI of the units that the shipped records use
UNITS = {
    "1/K": 1.0, "1/m^3": 1.0, "J/mol": 1.0, "K": 1.0, "K^2": 1.0, "kg/m^3": 1.0, "m/s": 1.0,
    "J/g": 1e3, "mJ/m^2": 1e-3, "K/MPa": 1e-6,
}  # fmt: skip


def library():
    """Return the shipped records as they stand in their files, by name."""
    folder = resources.files("spheru.material") / "library"
    files = [f for f in folder.iterdir() if f.name.endswith(".toml")]
    return {f.name.removesuffix(".toml"): tomllib.loads(f.read_text("utf-8")) for f in files}


def quantities(node, key=""):
    """Yield dotted key and entry of everything in a record that carries a value."""
    if isinstance(node, list):
        for index, item in enumerate(node):
            yield from quantities(item, f"{key}[{index}]")
    elif isinstance(node, dict):
        if "value" in node:
            yield key, node
        else:
            for name, item in node.items():
                yield from quantities(item, f"{key}.{name}".lstrip("."))


def si(entry):
    """Return the value of an entry in SI units."""
    value = entry["value"]
    if isinstance(value, list):
        return tuple(si({"value": item}) for item in value)
    if not isinstance(value, str):
        return value
    number, unit = value.split(" ")
    return float(number) + 273.15 if unit == "degC" else float(number) * UNITS[unit]


def lauritzen_hoffman(t, g0, kg, u_star, t_inf, t_m0, factor):
    """Return the growth rate at one temperature, term by term."""
    if t <= t_inf or t >= t_m0:
        return 0.0
    f = 2.0 * t / (t_m0 + t) if factor else 1.0
    return (
        g0
        * math.exp(-u_star / (8.31446261815324 * (t - t_inf)))
        * math.exp(-kg / (t * (t_m0 - t) * f))
    )


def cap_on_sphere(m, x):
    """Return the barrier of a cap on a sphere over that of a free sphere, from its geometry.

    Critical radius and surface energy are 1, so that the driving force is 2: surface towards the
    melt, less m times the contact, less twice the volume of the lens.
    """
    distance = math.sqrt(1.0 + x * x - 2.0 * m * x)  # between the centres
    phi = (x - m) / distance  # cosine of half the contact, seen from the particle
    psi = (m * x - 1.0) / distance  # cosine of half the free surface, seen from the nucleus

    def segment(cosine):
        return math.pi / 3.0 * (2.0 - 3.0 * cosine + cosine**3)

    free = 2.0 * math.pi * (1.0 - psi)
    contact = 2.0 * math.pi * x * x * (1.0 - phi)
    volume = segment(psi) - x**3 * segment(phi)
    return (free - m * contact - 2.0 * volume) / (4.0 * math.pi / 3.0)


def sampled_particle_density(mass_fraction, diameters, particle_density, polymer_density):
    """Return particles per volume of polymer by weighing a sample of particles."""
    mean_mass = particle_density * math.pi / 6.0 * np.mean(diameters**3)
    return mass_fraction * polymer_density / mean_mass
