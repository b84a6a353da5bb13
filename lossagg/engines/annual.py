"""The annual loss of one line, by an engine named or configured."""

from __future__ import annotations

from lossagg.cover import Cover
from lossagg.engines.result import AnnualLoss, Engine
from lossagg.errors import InputError
from lossagg.families.base import CountLaw, SizeLaw

ENGINE_NAMES = ("fourier", "panjer", "simulation", "far-tail")


def annual_loss(
    frequency: CountLaw,
    severity: SizeLaw,
    cover: Cover | None = None,
    engine: str | Engine = "fourier",
) -> AnnualLoss:
    """The distribution of a year's losses, or of what a cover pays of them.

    Args:
        frequency: law of the number of losses in a year.
        severity: law of the size of one loss.
        cover: terms of a cover; the result is then what the cover pays in the year. Without it, the
            ground-up losses.
        engine: "fourier" (exact, any count law), "panjer" (exact by recursion), "simulation" (any
            cover), "far-tail" (conditional Monte Carlo for levels such as 99.99 % and beyond), or an
            engine object that carries its settings, such as `Fourier(step=100.0)`.

    Returns:
        The annual loss with its measures and their accuracy.

    Raises:
        InputError: an unknown engine name, or something that is no law, cover or engine.
        EngineError: a model outside the engine's domain; the message names an engine that can.
    """
    if not isinstance(frequency, CountLaw):
        raise InputError(
            "frequency must be a count law", value=frequency, remedy="Give Poisson(mean=4.2), for example."
        )
    if not isinstance(severity, SizeLaw):
        raise InputError(
            "severity must be a size law",
            value=severity,
            remedy="Give Lognormal(mu=9.0, sigma=1.5), for example.",
        )
    if cover is not None and not isinstance(cover, Cover):
        raise InputError("cover must be a Cover", value=cover, remedy="Give Cover(deductible=1000.0).")
    return engine_of(engine).annual_loss(frequency, severity, cover)


def engine_of(engine: str | Engine) -> Engine:
    """The engine of a name, with its default settings; an engine object is handed back as it is.

    Raises:
        InputError: an unknown name, with the names there are, or an object that is no engine.
    """
    if not isinstance(engine, str):
        if not callable(getattr(engine, "annual_loss", None)):
            raise InputError(
                "engine must be a name or an engine object",
                value=engine,
                remedy=f"Names: {', '.join(ENGINE_NAMES)}.",
            )
        return engine
    if engine == "fourier":
        from lossagg.engines.fourier import Fourier

        return Fourier()
    if engine == "panjer":
        from lossagg.engines.panjer import Panjer

        return Panjer()
    if engine == "simulation":
        from lossagg.engines.simulation import Simulation

        return Simulation()
    if engine == "far-tail":
        from lossagg.engines.far_tail import FarTail

        return FarTail()
    raise InputError("unknown engine", value=engine, remedy=f"Use one of: {', '.join(ENGINE_NAMES)}.")
