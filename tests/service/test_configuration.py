"""Settings by flag, variable and file: who wins, what is told, and what is refused."""

import re
import tomllib

import pytest
from click.testing import CliRunner

from service import command_line, configuration
from service.configuration import DESCRIBED, Faults, load

SAID = {
    # name: text on the command line or in the environment, value in TOML, what comes out
    "host": ("0.0.0.0", "0.0.0.0", "0.0.0.0"),  # noqa: S104
    "port": ("80", 80, 80),
    "workers": ("3", 3, 3),
    "threads": ("5", 5, 5),
    "log-level": ("DEBUG", "Debug", "debug"),
    "max-body": ("1000", 1000, 1000),
    "graceful-timeout": ("7", 7, 7),
    "data-sheets": (".", ".", None),
}


@pytest.fixture(autouse=True)
def somewhere(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)


def toml(**values):
    return "".join(
        f"{name.replace('_', '-')} = {configuration._toml(value)}\n"
        for name, value in values.items()
    )


def written(tmp_path, text):
    file = tmp_path / "molwright.toml"
    file.write_text(text)
    return str(file)


def test_every_setting_is_listed_above():
    assert set(SAID) == {of.name for of in DESCRIBED}


@pytest.mark.parametrize("of", DESCRIBED, ids=lambda of: of.name)
def test_every_setting_comes_from_flag_variable_and_file(of, tmp_path):
    text, value, expected = SAID[of.name]
    file = written(tmp_path, toml(**{of.attribute: value}))
    by_flag = load({of.name: text}, {})
    by_variable = load({}, {of.variable: text})
    by_file = load({}, {}, file)
    for found, source in (
        (by_flag, f"--{of.name}"),
        (by_variable, of.variable),
        (by_file, f"{file}: {of.name}"),
    ):
        got = getattr(found.settings, of.attribute)
        assert got == (tmp_path if of.name == "data-sheets" else expected)
        assert found.sources[of.name] == source
    shown = CliRunner().invoke(command_line.main, ["serve", "--help"]).output
    assert f"--{of.name}" in shown
    assert of.variable in shown


def test_a_flag_wins_over_a_variable_over_the_file_over_the_default(tmp_path):
    file = written(tmp_path, "port = 1\nthreads = 1\nworkers = 1\n")
    environment = {
        "MOLWRIGHT_CONFIGURATION": file,
        "MOLWRIGHT_PORT": "2",
        "MOLWRIGHT_THREADS": "2",
    }
    found = load({"port": "3"}, environment)
    settings = found.settings
    assert (settings.port, settings.threads, settings.workers) == (3, 2, 1)
    assert settings.max_body == 16 * 2**20
    assert found.sources["max-body"] == "default"


def test_every_fault_of_every_source_is_named(tmp_path):
    file = written(tmp_path, 'port = "80"\nthread = 3\nthreads = true\n')
    with pytest.raises(Faults) as refused:
        load(
            {"max-body": "0", "workers": "two"},
            {"MOLWRIGHT_LOG_LEVEL": "loud", "MOLWRIGHT_PORT": "tcp://10.0.0.1:8410"},
            file,
        )
    faults = refused.value.faults
    assert len(faults) == 7
    text = "\n".join(faults)
    assert f"{file}: port: found '80'; a whole number from 0 to 65535 is needed" in faults
    assert f"{file}: no setting is called 'thread'; did you mean 'threads'?" in faults
    assert f"{file}: threads: found True; a whole number from 1 to 1000 is needed" in faults
    assert "--max-body: found '0'; a whole number of at least 1 is needed" in faults
    assert "--workers: found 'two'" in text
    assert "MOLWRIGHT_LOG_LEVEL: found 'loud'; one of debug, info," in text
    assert re.search("MOLWRIGHT_PORT: found 'tcp.*enableServiceLinks: false", text)


@pytest.mark.parametrize(
    ("text", "said"), [("port = ", "not TOML"), ("\xff", "not TOML"), (None, "cannot be read")]
)
def test_a_file_that_cannot_be_read_is_a_fault_beside_the_others(tmp_path, text, said):
    file = tmp_path / "molwright.toml"
    if text is not None:
        file.write_bytes(text.encode("latin-1"))
    with pytest.raises(Faults) as refused:
        load({"port": "-1"}, {}, str(file))
    first, second = refused.value.faults
    assert said in first
    assert str(file) in first
    assert second.startswith("--port: found '-1'")


@pytest.mark.parametrize("text", ["1.5", "0x10", " 1", "1_0", "", "\uff19", "9" * 30])
def test_a_whole_number_is_written_plainly(text):
    with pytest.raises(Faults):
        load({"threads": text}, {})


def test_config_shows_what_is_in_force_as_a_file_that_says_the_same(tmp_path):
    file = written(tmp_path, 'host = "::1"\nmax-body = 5\n')
    environment = {"MOLWRIGHT_CONFIGURATION": file, "MOLWRIGHT_PROT": "1", "MOLWRIGHT_PORT": "9"}
    shown = CliRunner().invoke(command_line.main, ["config", "--threads", "7"], env=environment)
    assert shown.exit_code == 0, shown.output
    assert "# MOLWRIGHT_PROT is not heeded" in shown.output
    (line,) = [line for line in shown.output.splitlines() if line.startswith("threads = 7")]
    assert line.endswith("# --threads")
    again = written(tmp_path, shown.output)
    assert load({}, {}, again).settings == load({"threads": "7"}, environment, None).settings
    assert tomllib.loads(shown.output)["host"] == "::1"


def test_a_bad_configuration_starts_nothing(tmp_path):
    file = written(tmp_path, "port = 99999\nmax-body = -1\n")
    done = CliRunner().invoke(command_line.main, ["serve", "--configuration", file])
    assert done.exit_code == 2
    assert "port: found 99999" in done.output
    assert "max-body: found -1" in done.output
