import pytest

from server import __main__
from server.paths import asset_dir


@pytest.mark.parametrize(
    ("words", "host", "port", "shown"),
    [
        ([], "127.0.0.1", 8000, "http://127.0.0.1:8000/"),
        (["--port", "81"], "127.0.0.1", 81, "http://127.0.0.1:81/"),
        (["--host", "::1"], "::1", 8000, "http://[::1]:8000/"),
    ],
)
def test_the_command_serves_this_computer_only_unless_told_otherwise(monkeypatch, capsys, words, host, port, shown):
    asked = {}
    monkeypatch.setattr(__main__.uvicorn, "run", lambda app, **how: asked.update(how, app=app))
    __main__.main(words)
    assert (asked["host"], asked["port"], asked["factory"]) == (host, port, True)
    assert shown in capsys.readouterr().out


def test_templates_and_static_files_are_found_and_nothing_else_is():
    assert (asset_dir("templates") / "base.html").is_file()
    assert (asset_dir("static") / "css" / "tokens.css").is_file()
    with pytest.raises(RuntimeError, match="reinstall"):
        asset_dir("no such folder")
