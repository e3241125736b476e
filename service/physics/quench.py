"""The gas of a magnet that quenches (methods G7)."""

from typing import Final

from numpy.typing import ArrayLike

from service.physics.arrays import Floats, non_negative, positive

# Peak of the gas rate over its mean. [1]  Methods G7; common practice, no source.
PEAK_OVER_MEAN: Final = 2.0


def quench_rate(gas_volume: ArrayLike, duration: ArrayLike) -> Floats:
    r"""Mean rate of gas while a magnet's liquid boils off in a quench.

    Parameters
    ----------
    gas_volume : array_like, shape (...)
        Gas of the whole liquid at room conditions; zero or more. [m3]
    duration : array_like, shape (...)
        Of the quench; above zero. [s]

    Returns
    -------
    ndarray, shape (...)
        Mean rate. [m3/s]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: \bar R = V_g / t_q

    The mean is what mixes; the peak, `PEAK_OVER_MEAN` times as much, makes the pressure.
    [common-practice]_.

    Examples
    --------
    >>> quench_rate(1274.0, 60.0).round(2)
    np.float64(21.23)
    """
    rate: Floats = non_negative("gas_volume", gas_volume) / positive("duration", duration)
    return rate


def evaporated_by_energy(stored_energy: ArrayLike, latent_heat: ArrayLike) -> Floats:
    r"""Most liquid that the energy stored in a magnet can evaporate.

    Parameters
    ----------
    stored_energy : array_like, shape (...)
        Zero or more. [J]
    latent_heat : array_like, shape (...)
        Of evaporation; above zero. [J/kg]

    Returns
    -------
    ndarray, shape (...)
        Mass. [kg]

    Raises
    ------
    OutOfRange
        An input is outside its range or not a number.

    Notes
    -----
    .. math:: m = E / L

    An upper bound: gas that leaves warm has taken more. [common-practice]_.

    Examples
    --------
    >>> evaporated_by_energy(3.75e6, 20_560.0).round(1)
    np.float64(182.4)
    """
    mass: Floats = non_negative("stored_energy", stored_energy) / positive(
        "latent_heat", latent_heat
    )
    return mass
