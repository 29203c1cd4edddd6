"""What every key of a column file means, with its unit: words for the JSON Schema and errors."""

from typing import Final

_MEANINGS: Final = {
    # the file
    "title": "Title of the column",
    "levels": "The level set",
    "air": "Air states; [air] for one, [[air]] for several that the advice must hold for",
    "horizontal": "The horizontal grid",
    "column": "How the unknowns are staggered",
    "wind": "Horizontal wind along the wave; without it the air is at rest",
    "updraft": "Frozen vertical wind",
    "terrain": "Terrain below the column",
    "upper_damping": "Absorbing layer below the lid",
    "diffusion": "Vertical and horizontal diffusion",
    "divergence_damping": "Damping of divergence",
    "rotation": "Rotation of the Earth",
    "reference": "Reference state of the implicit operator, with the keys of [air]",
    "split": "name = a splitting, or a table term = treatment",
    "advice": "What is asked of the advice",
    # levels
    "kind": "Which kind of table this is",
    "layers": "Number of layers, at least 2",
    "top_m": "Height of the lid above the ground [m], before any compression by the terrain",
    "lowest_layer_m": "Thickness of the lowest layer [m], before any compression by the terrain",
    "heights_m": "Heights above the ground [m]",
    "file": "CSV file, relative to the column file",
    "at": "Whether the heights are those of interfaces (ground and lid included) or layer centres",
    "order": "Direction in which the values are listed",
    "a": "Coefficients a at the interfaces [1]; this or ap",
    "ap": "Coefficients a times the reference pressure at the interfaces [Pa]; this or a",
    "b": "Coefficients b at the interfaces [1]",
    "reference_pressure_pa": "Pressure that multiplies a [Pa]",
    # air
    "name": "Name of the air state, for the answers",
    "surface_pressure_pa": "Pressure at the ground [Pa]",
    "temperature_k": "Temperature [K]",
    "surface_temperature_k": "Temperature at the ground [K]",
    "buoyancy_frequency_per_s": "Brunt-Vaisala frequency N [1/s]",
    "pressures_pa": "Pressures of the rows [Pa], instead of a file",
    "temperatures_k": "Temperatures of the rows [K], instead of a file",
    "winds_m_per_s": "Wind of the rows along the wave [m/s], instead of a file",
    # wind and updraft
    "advection": "Horizontal advection scheme",
    "speed_m_per_s": "Wind along the wave [m/s]",
    "surface_m_per_s": "Wind at the ground [m/s]",
    "shear_per_s": "Change of wind with height [1/s]",
    "speeds_m_per_s": "Speeds at these heights [m/s]",
    "scheme": "Vertical advection scheme",
    # horizontal and column
    "grid_spacing_m": "Horizontal grid spacing dx [m]",
    "gradient": "Horizontal gradient scheme",
    "directions": "Horizontal directions, 1 or 2; with 2, the default, the wave is diagonal",
    "largest_gradient_per_m": 'Largest |kx| of your own operator [1/m]; with gradient = "given"',
    "staggering": "Where the potential temperature lives: interfaces, or layers (lorenz)",
    # terrain
    "slope": "Slope of the coordinate surfaces at the ground [1]",
    "decay": "How the slope decays with height: linearly to 0 at the lid, or as exp(-z/h)",
    "decay_height_m": 'Decay height h of the slope [m]; with decay = "exponential"',
    "lowest_slope_gradient": "Whether the slope gradient of the lowest layer is halved",
    "surface_altitude_m": "Geopotential altitude of the ground [m]",
    "compression": "linear: heights are multiplied by (top - altitude)/top; none: taken as given; "
    "hybrid-pressure levels are never compressed",
    # damping, diffusion, rotation
    "rate_per_s": "Damping rate at the lid [1/s]",
    "base_m": "Height of the base of the absorbing layer above the ground [m]",
    "vertical_m2_per_s": "Vertical diffusivity K, the same at every height [m2/s]",
    "values_m2_per_s": "K at these heights, linear between and constant beyond them [m2/s]",
    "horizontal_coefficient": "Horizontal diffusion coefficient nu [m^(2 order)/s]",
    "horizontal_order": "Order m of the horizontal diffusion",
    "coefficient_m2_per_s": "Coefficient alpha of the divergence damping [m2/s]",
    "form": "Which divergence is damped",
    "coriolis_per_s": "Coriolis parameter f [1/s]; this or latitude_deg",
    "latitude_deg": "Latitude [degrees]; this or coriolis_per_s",
    # knobs of time schemes
    "substeps": "Substeps of the last stage of the time-split scheme; leapfrog stages of a step",
    "off_centring": "Off-centring of trapezoidal terms: 0 is centred, 1 backward Euler [1]",
    "filter": "Coefficient of the time filter of leapfrog [1]",
    "filter_share": "Share of the filter that the middle time level takes: 1 is the classical one, "
    "0.5 conserves the mean of three levels [1]",
    # advice
    "tableaux": "IMEX tableaux to try",
    "splits": "Splittings to try",
    "tableau_file": "TOML file of your own tableaux, relative to the column file",
    "safety": "Share of the stable step that is advised at most [1]",
    "divides_s": "Intervals that the step must divide into whole steps [s]",
    "efolding_s": "Tolerated e-folding time of growth [s]",
    "transient_limit": "Tolerated transient amplification [1]",
    "frequency_error": "Tolerated frequency error of resolved gravity waves [1]",
    "amplitude_loss_per_period": "Tolerated amplitude change per period of these waves [1]",
    "cost_explicit": "Cost of one explicit evaluation [1]",
    "cost_solve": "Cost of one implicit solve [1]",
    "cost_exchange": "Cost of one exchange with the neighbours [1]",
}
_OWN_MEANINGS: Final = {
    "StandardAir.surface_pressure_pa": "Pressure at the ground [Pa] in place of the standard one",
    "SoundingAir.surface_pressure_pa": "Pressure at the ground [Pa]; by default that of the ascent "
    "where it has heights and pressures, otherwise 101325",
    "SoundingAir.file": "CSV file, relative to the column file, with the columns height_m or "
    "pressure_pa, temperature_k and optionally wind_m_per_s",
    "SoundingAir.heights_m": "Altitudes of the rows above sea level [m], instead of a file",
    "SchemeTable.divergence_damping": "Forward extrapolation of pressure in the substeps [1]",
    "UpdraftTable.speed_m_per_s": "Peak W of W(z) = W sin(pi z/top) [m/s]; this or heights_m",
}


def meaning(model: str, key: str) -> str:
    """Say what a key means.

    Parameters
    ----------
    model : str
        Name of the table's model, for keys that mean something else in it.
    key : str
        The key.

    Returns
    -------
    str
        One sentence with the unit in brackets.
    """
    return _OWN_MEANINGS.get(f"{model}.{key}", _MEANINGS.get(key, ""))
