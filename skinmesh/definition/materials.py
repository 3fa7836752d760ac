"""Materials: what may be left out, and which constants no material can have."""

from __future__ import annotations

from collections.abc import Mapping
from math import sqrt

from skinmesh.definition.problems import FieldPath, FieldReport, shown
from skinmesh.definition.schema import MaterialFields
from skinmesh.laminate.material import Material

USUAL_NU23 = 0.3
SOFTEST = 1e5  # Pa; a hundredth of the softest core foams: such a modulus was meant in MPa or GPa
LIGHTEST = 5.0  # kg/m³; such a density was meant in g/cm³
_ISOTROPIC = ("E", "nu")
_IN_PLANE = ("E1", "E2", "G12", "nu12")
_FURTHER = ("E3", "nu13", "nu23", "G13", "G23")


def make_material(name: str, fields: MaterialFields, *, path: FieldPath, report: FieldReport) -> Material | None:
    """Make a material, filling in what the user left out.

    An isotropic material has E and nu. Where an orthotropic one gives only the constants of its plane, it is taken to
    be alike in 2 and 3: E3 = E2, nu13 = nu12, G13 = G12, G23 = E2 / (2 (1 + nu23)). nu23 is then 0.3, or half the
    largest value that a stable material allows if that is less.

    Parameters
    ----------
    name : str
    fields : MaterialFields
    path : tuple
        For messages.
    report : FieldReport

    Returns
    -------
    Material or None
        None where something is wrong with it.
    """
    given = {
        key: float(getattr(fields, key))
        for key in fields.model_fields_set & {*_ISOTROPIC, *_IN_PLANE, *_FURTHER}
        if getattr(fields, key) is not None
    }
    _check_choice(given, path, report)
    for key in sorted(given):
        if key[0] in "EG" and given[key] < SOFTEST:
            report.add(
                (*path, key), f"{shown(given[key])} Pa is softer than any core; moduli are in Pa: 41 GPa is 41e9"
            )
    density = fields.density
    if density is not None and density < LIGHTEST:
        report.add((*path, "density"), f"{shown(density)} kg/m³ is lighter than any core; 1.92 g/cm³ is 1920")
    if report.has(path) or density is None:
        return None
    constants = _isotropic_constants(given) if "E" in given else _orthotropic_constants(given)
    if "E" in given and not -1 < given["nu"] < 0.5:
        report.add((*path, "nu"), f"must lie between -1 and 0.5, got {shown(given['nu'])}")
        return None
    material = Material(name, **constants, density=density, is_isotropic="E" in given, source=fields.source)
    fault = instability(material)
    if fault:
        report.add(path, fault)
        return None
    return material


def _check_choice(given: Mapping[str, float], path: FieldPath, report: FieldReport) -> None:
    """Either the two constants of an isotropic material or the four of a ply's plane, not both."""
    isotropic = [key for key in _ISOTROPIC if key in given or report.has((*path, key))]
    orthotropic = [key for key in (*_IN_PLANE, *_FURTHER) if key in given or report.has((*path, key))]
    if isotropic and orthotropic:
        report.add(
            path,
            f"has {', '.join(isotropic)} of an isotropic and {', '.join(orthotropic)} of an orthotropic"
            " material; keep one kind",
        )
        return
    if not isotropic and not orthotropic:
        if not report.has(path):
            report.add(path, "needs its elastic constants: {E, nu}, or {E1, E2, G12, nu12}")
        return
    wanted = _ISOTROPIC if isotropic else _IN_PLANE
    missing = [key for key in wanted if key not in (isotropic or orthotropic)]
    if missing:
        kind = "an isotropic" if isotropic else "an orthotropic"
        report.add(
            path, f"is {kind} material without {', '.join(missing)}; give {'it' if len(missing) == 1 else 'them'}"
        )


def _isotropic_constants(given: Mapping[str, float]) -> dict[str, float]:
    E, nu = given["E"], given["nu"]
    G = E / (2.0 * (1.0 + nu)) if nu > -1.0 else E
    return {
        **dict.fromkeys(("E1", "E2", "E3"), E),
        **dict.fromkeys(("nu12", "nu13", "nu23"), nu),
        **dict.fromkeys(("G12", "G13", "G23"), G),
    }


def _orthotropic_constants(given: Mapping[str, float]) -> dict[str, float]:
    values = dict(given)
    values.setdefault("E3", values["E2"])
    values.setdefault("nu13", values["nu12"])
    values.setdefault("G13", values["G12"])
    values.setdefault("nu23", min(USUAL_NU23, 0.5 * _largest_nu23(values)))
    values.setdefault("G23", values["E2"] / (2.0 * (1.0 + values["nu23"])) if values["nu23"] > -1 else values["E2"])
    return values


def _largest_nu23(values: Mapping[str, float]) -> float:
    """Largest nu23 at which the compliance is positive definite, 0 where there is none.

    The root of the determinant 1 − nu12 nu21 − nu13 nu31 − nu23 nu32 − 2 nu21 nu32 nu13 (Jones, Mechanics of Composite
    Materials, 2nd ed., eq. 2.39, from memory), with nu_ji = nu_ij Ej / Ei.
    """
    E1, E2, E3, nu12, nu13 = (values[key] for key in ("E1", "E2", "E3", "nu12", "nu13"))
    a, b = E3 / E2, nu12 * nu13 * E3 / E1
    c = 1.0 - nu12**2 * E2 / E1 - nu13**2 * E3 / E1
    return max((-b + sqrt(b * b + a * c)) / a, 0.0) if c > 0.0 else 0.0


def instability(material: Material) -> str:
    """Say why no material can have these constants, nothing where one can.

    The compliance must be positive definite: a strain without work would be a source of energy. That is so where every
    |nu_ij| < √(Ei / Ej) and 1 − nu12 nu21 − nu13 nu31 − nu23 nu32 − 2 nu21 nu32 nu13 > 0 (Jones, Mechanics of Composite
    Materials, 2nd ed., section 2.4, from memory).

    Parameters
    ----------
    material : Material

    Returns
    -------
    str

    Examples
    --------
    >>> instability(Material("rubber band", 1e9, 9e9, 9e9, 0.5, 0.5, 0.3, 1e9, 1e9, 1e9, 1000.0))
    'no material has these constants: |nu12| must be < √(E1/E2) = 0.3333, got 0.5'
    """
    m = material
    for key, nu, Ei, Ej in (("12", m.nu12, m.E1, m.E2), ("13", m.nu13, m.E1, m.E3), ("23", m.nu23, m.E2, m.E3)):
        if abs(nu) >= sqrt(Ei / Ej):
            rule = f"|nu{key}| must be < √(E{key[0]}/E{key[1]}) = {sqrt(Ei / Ej):.4g}"
            return f"no material has these constants: {rule}, got {shown(nu)}"
    nu21, nu31, nu32 = m.nu12 * m.E2 / m.E1, m.nu13 * m.E3 / m.E1, m.nu23 * m.E3 / m.E2
    determinant = 1.0 - m.nu12 * nu21 - m.nu13 * nu31 - m.nu23 * nu32 - 2.0 * nu21 * nu32 * m.nu13
    if determinant <= 0.0:
        return (
            "no material has these constants: 1 - nu12 nu21 - nu13 nu31 - nu23 nu32 - 2 nu21 nu32 nu13 must be > 0,"
            f" got {determinant:.4g} (nu12 = {m.nu12:.4g}, nu13 = {m.nu13:.4g}, nu23 = {m.nu23:.4g}); are Poisson's"
            " ratios too large, or was nu21 given for nu12?"
        )
    return ""
