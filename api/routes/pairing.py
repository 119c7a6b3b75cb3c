"""A phone takes a key into its cookies, or forgets it; and who is asking."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Request, Response
from pydantic import BaseModel, ConfigDict, Field, StringConstraints

from api.keys import Door
from api.problems import ON_WRITING, answered_by
from daemon.keys import LONGEST_KEY, SCOPES, ApiKey, Scope

router = APIRouter(prefix="/pairing", tags=["keys"])

KEPT_S = 400 * 24 * 3600  # browsers keep no cookie for longer


class PairIn(BaseModel):
    """A key, as `dripleg key` gave it."""

    model_config = ConfigDict(
        extra="forbid",
        strict=True,
        json_schema_extra={"examples": [{"key": "k7f3q2mz.0mG1i7mXo0c0JY3Q2n1zq3o2kq8c9b4r"}]},
    )

    key: Annotated[str, StringConstraints(min_length=1, max_length=LONGEST_KEY)]


class ForgetIn(BaseModel):
    """An empty object: `{}`."""

    model_config = ConfigDict(extra="forbid", json_schema_extra={"examples": [{}]})


class AskingOut(BaseModel):
    """Who is asking, and what they may do here."""

    asked: bool = Field(description="whether keys are asked for at all on this address")
    open_reading: bool = Field(description="whether anybody may read")
    id: str | None = Field(description="of the key; null: none was sent", examples=["k7f3q2mz"])
    name: str | None = Field(
        description="who or what the key was made for", examples=["paint booth tablet"]
    )
    may: list[Scope] = Field(description="what the key may do", examples=[["read", "record"]])

    @classmethod
    def of(cls, door: Door, key: ApiKey | None) -> AskingOut:
        return cls(
            asked=door.closed,
            open_reading=door.open_reading or not door.closed,
            id=None if key is None else key.id,
            name=None if key is None else key.name,
            may=may_of(door, key),
        )


def may_of(door: Door, key: ApiKey | None) -> list[Scope]:
    """What a request may do, in the scopes' own order."""
    if not door.closed:
        return list(SCOPES)
    may: set[Scope] = set() if key is None else set(key.may)
    if door.open_reading:
        may.add("read")
    return [scope for scope in SCOPES if scope in may]


@router.get("", summary="Who is asking", responses=answered_by("log-unavailable"))
async def get_pairing(request: Request) -> AskingOut:
    """The key that came with this request, and what it may do. Needs none."""
    return AskingOut.of(request.app.state.door, request.scope.get("dripleg.key"))


@router.post(
    "",
    summary="Let this browser keep a key",
    responses=answered_by(*ON_WRITING),
)
async def pair(body: PairIn, request: Request, response: Response) -> AskingOut:
    """For the page at /pair: the key goes into a cookie that no script can read."""
    door: Door = request.app.state.door
    address = request.client.host if request.client is not None else ""
    key = await door.identify(body.key, address)
    response.set_cookie(
        door.cookie, body.key, max_age=KEPT_S, path="/", httponly=True, samesite="strict"
    )
    return AskingOut.of(door, key)


@router.post(
    "/forget",
    status_code=204,
    summary="Let this browser forget its key",
    responses=answered_by(*ON_WRITING),
)
async def forget(body: ForgetIn, request: Request) -> Response:
    """The key itself stays good: `dripleg key SITE revoke` ends it."""
    door: Door = request.app.state.door
    return Response(status_code=204, headers={"set-cookie": door.no_cookie})
