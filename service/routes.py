"""The endpoints. Everything slow runs in the service's own threads, through admission."""

from __future__ import annotations

from collections.abc import Callable
from typing import Annotated, Any, TypeVar

from fastapi import APIRouter, Path, Request, Response
from starlette.exceptions import HTTPException
from starlette.responses import FileResponse, JSONResponse, PlainTextResponse

from service import convert, section
from service.admission import Admission, Busy, Flag
from service.answers import CatalogAnswer, FootprintAnswer, HealthAnswer, SectionAnswer
from service.openapi import PNG, TEXT, problem_responses
from service.problems import ALL_TYPES, TOO_BUSY, problem
from service.relief import Tile, tile_count
from service.schemas import FootprintRequest, SectionRequest
from service.settings import TILE_ZOOM_MAX
from service.world import World

T = TypeVar("T")
router = APIRouter()


class AnswerResponse(JSONResponse):
    """A JSON answer; a number that is not finite is a defect and never sent."""

    def render(self, content: Any) -> bytes:
        """Return the body."""
        return convert.encode(content)


class GeoJSONResponse(AnswerResponse):
    """A GeoJSON answer."""

    media_type = "application/geo+json"


async def _admit(request: Request, admission: Admission, work: Callable[[Flag], T]) -> T | Response:
    """Return the result of the work, or the problem that every place is taken."""
    try:
        return await admission.run(work, request)
    except Busy:
        wait_s = request.app.state.world.settings.retry_after_s
        detail = "All places for solves are taken. Ask again in a moment."
        return problem(TOO_BUSY, detail, headers={"Retry-After": str(wait_s)})


@router.post(
    "/api/footprint",
    summary="Ground within modelled gliding range",
    response_model=FootprintAnswer,
    response_class=GeoJSONResponse,
    responses=problem_responses(400, 413, 415, 422, 500, 503),
)
async def footprint(request: Request, body: FootprintRequest) -> Response:
    """Return the ground that can still be reached after the engine has failed here."""
    world: World = request.app.state.world

    def work(flag: Flag) -> Response:
        record, found = world.solve(body, flag)
        return GeoJSONResponse(convert.footprint_json(body, record, found))

    return await _admit(request, request.app.state.solves, work)


@router.post(
    "/api/section",
    summary="Why a place is in or out of range",
    response_model=SectionAnswer,
    responses=problem_responses(400, 413, 415, 422, 500, 503),
)
async def section_to(request: Request, body: SectionRequest) -> Response:
    """Return ground, glide line and clearance to a place, the path, and the reason."""
    world: World = request.app.state.world
    section.check_target(body)

    def work(flag: Flag) -> Response:
        record, found = world.solve(body, flag)
        return AnswerResponse(section.section_json(body, record, found))

    return await _admit(request, request.app.state.solves, work)


@router.get(
    "/api/catalog",
    summary="Aeroplanes, landing sites, terrain, margins and limits",
    response_model=CatalogAnswer,
    responses=problem_responses(500),
)
async def catalog(request: Request) -> Response:
    """Return what this service has."""
    return JSONResponse(request.app.state.catalog)


@router.get(
    "/api/start",
    summary="The footprint request that the page starts with",
    response_model=FootprintRequest,
    responses=problem_responses(500),
)
async def start(request: Request) -> Response:
    """Return a footprint request that works with this service's data."""
    return JSONResponse(request.app.state.start)


Zoom = Annotated[int, Path(ge=0, le=TILE_ZOOM_MAX, description="Zoom of the web-mercator tile.")]
Column = Annotated[int, Path(ge=0, lt=1 << TILE_ZOOM_MAX, description="Column, from the west.")]
Row = Annotated[int, Path(ge=0, lt=1 << TILE_ZOOM_MAX, description="Row, from the north.")]


@router.get(
    "/api/tiles/relief/{z}/{x}/{y}.png",
    summary="Shaded relief of the terrain",
    response_class=Response,
    responses={200: PNG, 304: {"description": "The tile at hand is still good."},
               **problem_responses(404, 422, 500, 503)},
)  # fmt: skip
async def relief_tile(request: Request, z: Zoom, x: Column, y: Row) -> Response:
    """Return a tile of 256 x 256 pixels, clear where no ground is; 404 off every terrain's box."""
    if x >= tile_count(z) or y >= tile_count(z):
        raise HTTPException(404)
    state = request.app.state
    tile: Tile | Response | None = state.relief.cached(z, x, y)
    if tile is None:
        tile = await _admit(request, state.tiles, lambda _: state.relief.tile(z, x, y))
    if isinstance(tile, Response):
        return tile
    if tile is None:
        raise HTTPException(404)
    headers = {"ETag": tile.etag, "Cache-Control": "max-age=3600"}
    known = [tag.strip().removeprefix("W/") for tag in
             request.headers.get("if-none-match", "").split(",")]  # fmt: skip
    if tile.etag in known or "*" in known:
        return Response(status_code=304, headers=headers)
    return Response(tile.png, media_type="image/png", headers=headers)


@router.get(
    "/health",
    summary="Whether the service is up",
    response_model=HealthAnswer,
    responses=problem_responses(500),
)
async def health(request: Request) -> Response:
    """Return how many solves run and how many wait."""
    solves: Admission = request.app.state.solves
    state: dict[str, Any] = {"status": "ok", "solving": solves.running, "waiting": solves.waiting}
    return JSONResponse(state, headers={"Cache-Control": "no-store"})


TypeName = Annotated[str, Path(max_length=64, description="The last part of a type URI.")]


@router.get(
    "/problems/{name}",
    summary="What a problem type means",
    response_class=PlainTextResponse,
    responses={200: TEXT, **problem_responses(404, 422, 500)},
)
async def problem_type(name: TypeName) -> Response:
    """Return status and title of a problem type, as its `type` member points here."""
    for kind in ALL_TYPES:
        if kind.slug == name:
            return PlainTextResponse(f"{kind.status} {kind.title}.\n")
    raise HTTPException(404)


@router.get("/", include_in_schema=False)
async def page(request: Request) -> Response:
    """Return the map page."""
    world: World = request.app.state.world
    return FileResponse(world.settings.static / "index.html")
