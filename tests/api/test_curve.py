"""The course of a case over HTTP: as values, as a table, as a picture."""


def test_without_a_choice_it_is_the_case_of_the_status(ask, estate):
    room = estate.north.room["id"]
    worst = ask.body(f"/v1/rooms/{room}/status")["worst"]
    curve = ask.body(f"/v1/rooms/{room}/curve", key="reader")
    assert {name: curve["case"][name] for name in worst} == worst
