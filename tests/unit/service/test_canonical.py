"""The fingerprint of a document sees what it means and not how it is written."""

from service.canonical import fingerprint


def test_order_and_the_look_of_whole_numbers_do_not_matter():
    assert fingerprint({"a": 1, "b": [2.0, {"c": 3, "d": 4}]}) == fingerprint({"b": [2, {"d": 4, "c": 3.0}], "a": 1})


def test_what_is_meant_does_matter():
    documents = [{"a": 1}, {"a": "1"}, {"a": 1.5}, {"a": True}, {"a": None}, {"a": [1]}, {"A": 1}, {"a": 0}]
    assert len({fingerprint(document) for document in documents}) == len(documents)


def test_any_text_has_one():
    assert fingerprint({"title": "Γ\ud800 ☃"}).startswith("sha256:")
