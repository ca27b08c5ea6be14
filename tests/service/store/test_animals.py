"""Animals as they are kept."""

from sqlalchemy import func, select

from service.store import schema
from service.store.animals import NO_ATTRIBUTES, get_animal, list_animals
from service.store.database import DEFAULT_PROGRAMME
from tests.service.store.sent import describe, send, walk


def _get(store, identifier):
    with store.read() as connection:
        return get_animal(connection, DEFAULT_PROGRAMME, identifier)


def test_put_says_whether_anything_changed(store):
    """The same attributes again are no change and raise no revision; other ones are, and the old ones are kept."""
    assert describe(store, "seal", species="grey seal")
    revision = _get(store, "seal").revision
    assert not describe(store, "seal", species="grey seal")
    assert _get(store, "seal").revision == revision
    assert describe(store, "seal", species="harbour seal")
    assert _get(store, "seal").attributes["species"] == "harbour seal"
    assert _get(store, "seal").revision > revision
    with store.read() as connection:
        assert connection.execute(select(func.count()).select_from(schema.animal_version)).scalar() == 2


def test_attributes_do_not_touch_fixes(store):
    """An animal known by its fixes gets attributes; an animal put first gets fixes."""
    send(store, walk("seal", 4))
    assert _get(store, "seal").attributes == NO_ATTRIBUTES
    assert not describe(store, "seal")
    assert describe(store, "seal", sex="female")
    assert _get(store, "seal").fixes == 4
    assert describe(store, "fox", sex="male")
    send(store, walk("fox", 2))
    assert (_get(store, "fox").fixes, _get(store, "fox").attributes["sex"]) == (2, "male")


def test_animals_are_listed_in_pages(store):
    """Pages by identifier join to the whole."""
    names = ["b", "a", "c", "Ä", "zebra"]
    for name in names:
        describe(store, name)
    with store.read() as connection:
        found, after = [], ""
        while page := list_animals(connection, DEFAULT_PROGRAMME, after, 2):
            found += [animal.identifier for animal in page]
            after = found[-1]
    assert found == sorted(names)
    assert _get(store, "nobody") is None
