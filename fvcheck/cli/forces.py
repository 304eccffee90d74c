"""``fvcheck forces FILE --body NAME …``."""

from __future__ import annotations

from functools import partial
from typing import Annotated, Any

from typer import Option

from fvcheck.cli.options import (
    FluidOptions,
    OptionalFile,
    Output,
    Reading,
    Spread,
    SurfaceList,
    number,
    spread,
    vector,
    words,
)
from fvcheck.errors import SetupError

_BODY, _ROUTES = "Bodies", "Routes"


def _body(*names: str, metavar: str, text: str) -> Any:
    return Option(*names, metavar=metavar, help=text, rich_help_panel=_BODY)


def _route(*names: str, metavar: str, text: str) -> Any:
    return Option(*names, metavar=metavar, help=text, rich_help_panel=_ROUTES)


@spread
def command(
    reading: Reading,
    fluid: FluidOptions,
    output: Output,
    run: Spread,
    file: OptionalFile = None,
    body: Annotated[
        list[str] | None, _body(metavar="NAME", text="A body or patch; default every body. Repeatable.")
    ] = None,
    reference: Annotated[
        str | None, _body(metavar="U,L,RHO", text="Reference values of coefficients.")
    ] = None,
    direction: Annotated[
        str | None, _body(metavar="X,Y", text="Of the stream and of drag; default 1,0.")
    ] = None,
    about: Annotated[str | None, _body(metavar="X,Y", text="Point of the moment; default 0,0.")] = None,
    method: Annotated[
        list[str] | None,
        _route(metavar="ROUTE,…", text="body-surface, control-surface, band, wake, circulation."),
    ] = None,
    distance: Annotated[
        list[str] | None, _route(metavar="D,…", text="Of control surfaces from the body; default three.")
    ] = None,
    surface: SurfaceList = None,
    band: Annotated[
        str | None, _route(metavar="D1,D2", text="Distances that the band average lies between.")
    ] = None,
    wake: Annotated[
        str | None, _route(metavar='"line(…)"', text="Across the wake, for the wake route.")
    ] = None,
    wake_formula: Annotated[
        str, _route(metavar="momentum|betz|jones", text="Of the wake route.")
    ] = "momentum",
    sweep: Annotated[
        str | None,
        _route(metavar="FAMILY", text='Force against position: "around(pier, 0.2 .. 1.0, 9)".'),
    ] = None,
) -> int:
    """Forces and moments on bodies, by every route side by side.

    With -s: the control surfaces to use, in place of those at distances. The exit
    status is 3 where no route to a body could be gone.
    """
    from fvcheck.cli.output import check_target, show
    from fvcheck.cli.settings import settle
    from fvcheck.flow import stored_flow
    from fvcheck.formats.registry import open_export
    from fvcheck.opening import open_near
    from fvcheck.routes import forces
    from fvcheck.routes.region import surfaces_near
    from fvcheck.surfaces import ControlSurface
    from fvcheck.surfaces.family import parse_family
    from fvcheck.text.forces import forces_text
    from fvcheck.verdict import EXIT_STATUS, UNDECIDED

    check_target(output)
    settings = settle(file, reading, fluid, surface)
    if settings.step == "all":
        raise SetupError("forces are of one step", mend="Give --step a number, or leave it out.")
    names = body or list(settings.bodies) or None
    options: dict[str, Any] = {
        "methods": words(method),
        "distances": [number(word, "--distance", "--distance D,D,…") for word in words(distance) or ()],
        "surfaces": settings.surfaces if surface else None,
        "band_between": None if band is None else vector(band, "--band", "--band D1,D2"),
        "wake_line": settings.wakes if wake is None else ControlSurface.parse(wake),
        "wake_formula": wake_formula,
        "sweep": None if sweep is None else parse_family(sweep),
        "about": settings.moment_about(names) if about is None else vector(about, "--about", "--about X,Y"),
        "direction": None if direction is None else vector(direction, "--direction", "--direction X,Y"),
        "reference": settings.bodies if reference is None else _reference(reference),
    }
    export = open_export(settings.file)
    if export.steps > 1:  # held against another state as a whole
        flow = stored_flow(export, step=settings.step, **settings.reading)
    else:
        drawn = ("distances", "surfaces", "band_between", "wake_line", "sweep")
        near = partial(surfaces_near, body=names, **{name: options[name] for name in drawn})
        flow = open_near(
            export,
            near,
            inside=True,
            step=settings.step,
            workers=run.workers,
            scheduler=run.scheduler,
            **settings.reading,
        )
    found = forces(flow, names, **options)
    show(output, found.to_dict, lambda: forces_text(found, output.quiet))
    # A body whose every route was refused is left undecided.
    numbered = {e.body for e in found.estimates if not e.refused}
    return 0 if all(e.body in numbered for e in found.estimates) else EXIT_STATUS[UNDECIDED]


def _reference(text: str) -> dict[str, float]:
    parts, form = text.split(","), "--reference VELOCITY,LENGTH,DENSITY"
    if len(parts) != 3:
        raise SetupError(f"--reference: {text!r} is not three numbers", mend=f"Write {form}.")
    names = ("velocity", "length", "density")
    return {name: number(part, "--reference", form) for name, part in zip(names, parts)}
