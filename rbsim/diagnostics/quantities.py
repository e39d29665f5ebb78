"""The one table of recorded quantities; files, tables and figures read names, symbols and units from here."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Quantity:
    """A recorded number and how to label it.

    Parameters
    ----------
    name : str
        Name in files.
    symbol : str
        Symbol in figures (mathtext).
    unit : str
        Unit in free-fall scaling; "1" for pure numbers, Delta for the temperature drop, H for the height.
    meaning : str
        One phrase.
    """

    name: str
    symbol: str
    unit: str
    meaning: str


HISTORY = (
    Quantity(
        "nusselt_bottom", r"$Nu_\mathrm{bottom}$", "1", "Nusselt number, mean gradient at the bottom plate"
    ),
    Quantity("nusselt_top", r"$Nu_\mathrm{top}$", "1", "Nusselt number, mean gradient at the top plate"),
    Quantity(
        "nusselt_volume", r"$Nu_\mathrm{volume}$", "1", "Nusselt number, volume mean of the convective flux"
    ),
    Quantity("nusselt_midplane", r"$Nu_\mathrm{midplane}$", "1", "Nusselt number, flux through mid-height"),
    Quantity("nusselt_thermal", r"$Nu_\mathrm{thermal}$", "1", "Nusselt number from thermal dissipation"),
    Quantity("nusselt_kinetic", r"$Nu_\mathrm{kinetic}$", "1", "Nusselt number from kinetic dissipation"),
    Quantity("storage_bottom", r"$S_\mathrm{bottom}$", "1", "unsteady term of the bottom-plate definition"),
    Quantity("storage_top", r"$S_\mathrm{top}$", "1", "unsteady term of the top-plate definition"),
    Quantity("storage_midplane", r"$S_\mathrm{midplane}$", "1", "unsteady term of the mid-height definition"),
    Quantity("storage_thermal", r"$S_\mathrm{thermal}$", "1", "unsteady term of the thermal dissipation"),
    Quantity("storage_kinetic", r"$S_\mathrm{kinetic}$", "1", "unsteady term of the kinetic dissipation"),
    Quantity("reynolds", r"$Re$", "1", "Reynolds number of the rms velocity and the height"),
    Quantity(
        "kinetic_energy", r"$E$", "free-fall velocity squared", "volume mean of half the squared velocity"
    ),
    Quantity(
        "temperature_mean", r"$\langle T\rangle$", "Delta", "volume mean temperature above the top plate"
    ),
    Quantity(
        "thermal_layer_bottom",
        r"$\delta_{T,\mathrm{bottom}}$",
        "H",
        "slope thickness of the bottom thermal layer",
    ),
    Quantity(
        "thermal_layer_top", r"$\delta_{T,\mathrm{top}}$", "H", "slope thickness of the top thermal layer"
    ),
    Quantity(
        "kinetic_layer_bottom",
        r"$\delta_{u,\mathrm{bottom}}$",
        "H",
        "height of the largest rms horizontal velocity in the lower half",
    ),
    Quantity(
        "kinetic_layer_top",
        r"$\delta_{u,\mathrm{top}}$",
        "H",
        "depth of the largest rms horizontal velocity in the upper half",
    ),
    Quantity("tail_x", r"$\epsilon_x$", "1", "spectral tail of the Fourier modes over the largest amplitude"),
    Quantity(
        "tail_z", r"$\epsilon_z$", "1", "spectral tail of the Chebyshev modes over the largest amplitude"
    ),
    Quantity("roll_pairs", r"$n$", "1", "number of roll pairs in the period"),
    Quantity("step_size", r"$\Delta t$", "free-fall time", "length of the last time step"),
    Quantity("courant", r"$C$", "1", "Courant number of the last time step on the dealiased grid"),
)

PROFILES = (
    Quantity("temperature_profile", r"$\langle T\rangle_x$", "Delta", "horizontal mean temperature"),
    Quantity("nusselt_profile", r"$Nu(z)$", "1", "vertical heat flux, mean over x"),
    Quantity(
        "temperature_rms_profile",
        r"$T_\mathrm{rms}$",
        "Delta",
        "rms over x of the temperature about its mean",
    ),
    Quantity(
        "horizontal_velocity_rms_profile",
        r"$u_\mathrm{rms}$",
        "free-fall velocity",
        "rms over x of the horizontal velocity",
    ),
    Quantity(
        "vertical_velocity_rms_profile",
        r"$w_\mathrm{rms}$",
        "free-fall velocity",
        "rms over x of the vertical velocity",
    ),
)

#: What a thermometer records; also the fields of a snapshot.
READINGS = (
    Quantity("temperature", r"$T$", "Delta", "temperature above the top plate"),
    Quantity("horizontal_velocity", r"$u$", "free-fall velocity", "horizontal velocity"),
    Quantity("vertical_velocity", r"$w$", "free-fall velocity", "vertical velocity"),
)
