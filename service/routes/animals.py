"""Animals and their attributes."""

from __future__ import annotations

from typing import Annotated, Any, Final

from fastapi import APIRouter, Depends, Query, Request
from starlette.responses import Response

from service.body_spool import SpooledBody, spooled
from service.cursors import pack_cursor, unpack_cursor
from service.etags import check_preconditions, entity_tag, not_modified
from service.media_types import JSON
from service.principal import Caller
from service.problems import Problem
from service.readers.animal_attributes import read_animal_attributes
from service.readers.json_body import read_json_object
from service.routes.context import Site, WriteTurn, json_response, refuse_identifier
from service.routes.models import AnimalBody, AnimalPage
from service.routes.parameters import PageParameters, Parameters
from service.store.animals import AnimalRecord, get_animal, list_animals, put_animal
from service.store.submissions import Counts, Payload, store_submission
from service.writers.animals import animal_body

LARGEST_ANIMAL_BYTES: Final = 1_000_000

router = APIRouter(tags=["animals"])


@router.get("/animals", response_model=AnimalPage)
def get_animals(site: Site, caller: Caller, parameters: Annotated[PageParameters, Query()]) -> Response:
    """Animals by identifier."""
    after = unpack_cursor(parameters.cursor, str) or ("",)
    with site.store.read() as connection:
        found = list_animals(connection, caller.programme, str(after[0]), parameters.limit + 1)
    page = found[: parameters.limit]
    more = pack_cursor([page[-1].identifier]) if len(found) > len(page) else None
    return json_response({"animals": [animal_body(caller.programme, animal) for animal in page], "next": more})


@router.get("/animals/{animal}", response_model=AnimalBody)
def get_one_animal(
    request: Request, site: Site, caller: Caller, animal: str, _: Annotated[Parameters, Query()]
) -> Response:
    """One animal."""
    with site.store.read() as connection:
        record = get_animal(connection, caller.programme, animal)
    if record is None:
        raise unknown_animal(animal)
    tag = entity_tag(record.revision, JSON)
    return not_modified(request.headers, tag) or _answer(caller.programme, record, 200)


@router.put(
    "/animals/{animal}",
    response_model=AnimalBody,
    responses={201: {"model": AnimalBody, "description": "The animal is new."}},
    openapi_extra={"requestBody": {"required": True, "content": {JSON: {"schema": {"type": "object"}}}}},
)
def put_one_animal(
    request: Request,
    site: Site,
    caller: Caller,
    animal: str,
    _: Annotated[Parameters, Query()],
    body: Annotated[SpooledBody, Depends(spooled(JSON, largest_bytes=LARGEST_ANIMAL_BYTES))],
    _turn: WriteTurn,
) -> Response:
    """Set all attributes of an animal; those left out are none. Fixes are not touched."""
    refuse_identifier(animal)
    attributes = read_animal_attributes(read_json_object(body.file.read()), animal, site.settings.time_zone)
    with site.store.write("animal") as tx:
        before = get_animal(tx.connection, caller.programme, animal)
        check_preconditions(request.headers, before.revision if before else None)
        changed = put_animal(tx, caller.programme, animal, attributes)
        payload = Payload(body.file, body.size, body.sha256, body.media_type, {"animal": animal})
        counts = Counts(rows=1, accepted=int(changed), unchanged=int(not changed), corrected=0, rejected=0)
        store_submission(tx, caller.programme, "animal", payload, counts, [], [], [])
        record = get_animal(tx.connection, caller.programme, animal)
    site.notify()
    if record is None:
        raise RuntimeError(f"The animal {animal!r} was stored and is not there.")
    return _answer(caller.programme, record, 200 if before else 201)


def unknown_animal(animal: str) -> Problem:
    """Nothing is known of that animal."""
    detail = f"There is no animal {animal[:100]!r}. It is made by its first fix, or by PUT /animals/{{animal}}."
    return Problem(404, "unknown-animal", "There is no such animal", detail)


def _answer(programme: str, record: AnimalRecord, status: int) -> Response:
    body: dict[str, Any] = animal_body(programme, record)
    return json_response(body, status, {"ETag": entity_tag(record.revision, JSON)})
