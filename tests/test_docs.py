"""README and DEVELOPERS against the program: nothing named that is not there, nothing left out."""

import json
import re
from pathlib import Path

import pytest
from typer.main import get_command

import digitize.cli
import measure.cli

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text("utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text("utf-8")
COMMANDS = [
    (app, name)
    for app in (digitize.cli.app, measure.cli.app)
    for name in get_command(app).commands  # type: ignore[attr-defined]
]
PACKAGES = ("digitize", "measure")


@pytest.mark.parametrize(("app", "name"), COMMANDS, ids=lambda v: v if isinstance(v, str) else "")
def test_every_command_and_option_is_in_the_readme(app, name):
    command = get_command(app).commands[name]
    assert f" {name} " in README
    for parameter in command.params:
        flags = [flag for flag in parameter.opts if flag.startswith("--") and flag != "--help"]
        for flag in flags:
            shown = "-o" if flag == "--output" else flag
            assert re.search(rf"{shown}\b", README), f"{flag} of {name} is not in README.md"


def test_no_option_is_described_that_does_not_exist():
    known = {
        flag
        for app, name in COMMANDS
        for parameter in get_command(app).commands[name].params
        for flag in parameter.opts
    }
    table = [line for line in README.splitlines() if line.startswith("| `-")]
    assert len(table) > 8
    for line in table:
        for flag in re.findall(r"`(--?[a-z][a-z-]*)", line.split("|")[1]):
            assert flag in known, f"{flag} in README.md is no option"


@pytest.mark.parametrize("package", PACKAGES)
def test_every_module_has_its_line_for_developers(package):
    section = DEVELOPERS.split(f"### {package}\n")[1].split("\n## ")[0].split("\n### ")[0]
    cells = [line.split("|")[1] for line in section.splitlines() if line.startswith("| `")]
    named = {name for cell in cells for name in re.findall(r"`([a-z_]+)/?`", cell)}
    entries = sorted((ROOT / package).iterdir())
    modules = {p.stem for p in entries if p.suffix == ".py" and p.stem != "__init__"}
    folders = {p.name for p in entries if (p / "__init__.py").is_file()}
    assert modules | folders <= named, sorted((modules | folders) - named)
    assert named <= modules | folders, sorted(named - modules - folders)


@pytest.mark.parametrize("text", [README, DEVELOPERS], ids=["README", "DEVELOPERS"])
def test_files_that_are_named_exist(text):
    links = re.findall(r"\]\(([^)#]+)\)", text)
    paths = re.findall(r"`((?:digitize|measure|tests|sample_scans)/[\w/.]+)`", text)
    assert links or paths
    for name in [*links, *paths]:
        assert (ROOT / name).exists(), name


@pytest.mark.parametrize(
    ("schema", "heading"),
    [
        ("digitize/schema/tracing.schema.json", "**The tracing"),
        ("measure/schema/reading.schema.json", "**The reading"),
    ],
)
def test_fields_that_the_readme_names_are_in_the_schema(schema, heading):
    document = json.loads((ROOT / schema).read_text("utf-8"))
    paragraph = README.split(heading)[1].split("\n\n")[0]
    described = json.dumps(document)
    for name in re.findall(r"`([a-z_]+)`", paragraph):
        assert f'"{name}"' in described, f"{name} is not in {schema}"


def test_the_setup_line_reads_a_page_that_is_there():
    line = next(line for line in README.splitlines() if line.startswith("python3 -m venv"))
    sample = line.split(" read ")[1].split()[0]
    assert (ROOT / sample).is_file()
    assert (ROOT / sample).with_suffix(".expected.json").is_file()
