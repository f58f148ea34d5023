"""The web application: routes, middleware, warm-up."""

from __future__ import annotations

import asyncio
import logging
from collections.abc import AsyncIterator
from contextlib import asynccontextmanager
from dataclasses import replace
from typing import Any

from fastapi import FastAPI
from starlette.middleware import Middleware
from starlette.staticfiles import StaticFiles

import geo.footprint
from perf.errors import ModelError
from service import convert, openapi, problems, routes
from service.admission import Admission
from service.body_guard import BodyGuard
from service.middleware import HeadAsGet, SecurityHeaders
from service.relief import Relief
from service.schemas import FootprintRequest
from service.settings import Settings, check_data, check_static
from service.world import Solver, World, library_folder, load_world

logger = logging.getLogger("engineout")


def create_app(settings: Settings | None = None, solver: Solver | None = None) -> FastAPI:
    """Return the application.

    Parameters
    ----------
    settings
        Settings; None means the defaults.
    solver
        The function that computes a footprint; None means `geo.footprint.solve`.

    Raises
    ------
    SettingsError
        A folder that is needed is missing; the message says which.
    """
    settings = settings or Settings()
    check_data(settings)
    check_static(settings)
    library = library_folder()
    world = load_world(settings)
    for refused in world.store.refused:
        logger.warning("A terrain file is refused: %s", refused.detail)
    if solver is not None:
        world = replace(world, solver=solver)
    app = FastAPI(
        title="Gliding footprint",
        version="0.1.0",
        description=openapi.DESCRIPTION,
        docs_url=None,
        redoc_url=None,
        lifespan=_lifespan,
        redirect_slashes=False,  # a redirect would repeat the Host header, and POST twice
        middleware=[
            Middleware(SecurityHeaders),
            Middleware(HeadAsGet),
            Middleware(problems.CatchAll),
            Middleware(BodyGuard, settings.body_max_bytes, settings.depth_max),
        ],
    )
    app.state.world = world
    app.state.start = world.start()
    app.state.catalog = world.catalog()
    app.state.relief = Relief(world.store, settings.tile_cache_bytes)
    _open_places(app)
    problems.install(app, settings.retry_after_s)
    app.include_router(routes.router)
    app.mount("/static/lib/map", StaticFiles(directory=library), name="library")
    app.mount("/static", StaticFiles(directory=settings.static), name="static")
    openapi.install(app)
    return app


def _open_places(app: FastAPI) -> None:
    """Make the threads and queues; again at each start, as stopping closes them for good."""
    settings: Settings = app.state.world.settings
    app.state.solves = Admission("solve", settings.solves_at_once, settings.solves_waiting)
    app.state.tiles = Admission("tile", settings.tiles_at_once, settings.tiles_waiting)


@asynccontextmanager
async def _lifespan(app: FastAPI) -> AsyncIterator[None]:
    """Warm up before the first request is taken; stop all work at the end."""
    world: World = app.state.world
    _open_places(app)
    if world.settings.warm_up:
        await asyncio.to_thread(warm_up, world, app.state.start)
    logger.info("Ready.")
    yield
    app.state.solves.stop()
    app.state.tiles.stop()


def warm_up(world: World, start: dict[str, Any]) -> None:
    """Compile the solver and solve the start case, so that the first request is quick."""
    logger.info("Preparing the solver; the first start compiles it, which takes a minute or two.")
    for detail in ("coarse", "fine"):
        request = FootprintRequest.model_validate({**start, "track_deg": 90, "detail": detail})
        try:
            record = convert.record_of(request.aircraft, world.records)
            geo.footprint.warm_up(world.store, convert.case_of(request, record))
        except ModelError as error:
            logger.warning("The start case cannot be solved: %s", error.detail)
            return
