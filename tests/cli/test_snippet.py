"""``calibrate snippet``."""

import json
import tomllib


def test_list(calibrate):
    ended = calibrate("snippet")
    assert ended.code == 0
    assert "permanent_favourable" in ended.out
    assert "examples, not defaults" in ended.out


def test_one_is_printed_as_it_is(calibrate):
    ended = calibrate("snippet", "wind")
    assert ended.code == 0
    assert set(tomllib.loads(ended.out)["variables"]) == {"q", "c_e", "c_p", "m_w"}


def test_json(calibrate):
    content = json.loads(calibrate("snippet", "--json").out)
    assert [s["name"] for s in content][:2] == ["permanent", "permanent_favourable"]
    assert all(s["needs"] and s["text"].startswith("# ") for s in content)


def test_an_unknown_name_is_told(calibrate):
    ended = calibrate("snippet", "wnd")
    assert ended.code == 2
    assert "no snippet 'wnd'" in ended.err
    assert "Did you mean 'wind'?" in ended.err
