"""What is written about the tool holds: docstrings, help, README, guide, the checks before landing.

README commands are run as they stand, in a copy of the samples, but for making the environment.
"""

import ast
import inspect
import re
import shlex
import shutil
import subprocess
import tomllib
from collections.abc import Iterator
from pathlib import Path

import click
import pytest
from click.testing import CliRunner
from test_layers import HOME, ORDER, files, functions, tree_of

import convert
from convert.cli import main
from convert.folder import CONTRACT

ROOT = Path(__file__).parents[1]
BUILD = (
    "python3 -m venv .venv && .venv/bin/pip install -q . && .venv/bin/branchwright build "
    "cases/substation/station.yaml --out .demo --force"
)
TEST = "python3 -m venv .venv && .venv/bin/pip install -q '.[test]' && .venv/bin/pytest"


def text_of(name: str) -> str:
    return (ROOT / name).read_text(encoding="utf-8")


# --- docstrings ---------------------------------------------------------------------------------


def section(docstring: str, title: str) -> list[str] | None:
    """Names of a numpy-style section (`a, b : float` names two), or None without the section."""
    lines = inspect.cleandoc(docstring).split("\n")
    heads = [at for at, line in enumerate(lines[:-1]) if re.fullmatch("-{3,}", lines[at + 1])]
    for at in heads:
        if lines[at] == title:
            end = min((later for later in heads if later > at), default=len(lines))
            entries = [line for line in lines[at + 2 : end] if line and not line.startswith(" ")]
            named = ", ".join(entry.partition(" : ")[0] for entry in entries)
            return [name.strip() for name in named.split(",")] if entries else []
    return None


def signature(function: ast.FunctionDef) -> list[str]:
    a = function.args
    names = [x.arg for x in (*a.posonlyargs, *a.args)]
    names += [f"*{a.vararg.arg}"] if a.vararg else []
    names += [x.arg for x in a.kwonlyargs]
    names += [f"**{a.kwarg.arg}"] if a.kwarg else []
    return [name for name in names if name not in ("self", "cls")]


DOCUMENTED = {
    f"{file}:{function.name}": function
    for file in files()
    for function in functions(file)
    if section(ast.get_docstring(function) or "", "Parameters") is not None
}
CLASSES = {
    f"{file}:{node.name}": node
    for file in files()
    for node in ast.walk(tree_of(file))
    if isinstance(node, ast.ClassDef) and section(ast.get_docstring(node) or "", "Attributes")
}


def test_sections_are_found():
    assert len(DOCUMENTED) > 10
    assert len(CLASSES) > 2
    assert section("Add.\n\nParameters\n----------\na, b : float\n    Two.\n", "Parameters") == [
        "a",
        "b",
    ]


@pytest.mark.parametrize("name", DOCUMENTED)
def test_documented_parameters_are_those_of_the_signature(name: str):
    function = DOCUMENTED[name]
    assert section(ast.get_docstring(function), "Parameters") == signature(function)


@pytest.mark.parametrize("name", CLASSES)
def test_documented_attributes_exist(name: str):
    node = CLASSES[name]
    fields = {s.target.id for s in node.body if isinstance(s, ast.AnnAssign)}
    assert set(section(ast.get_docstring(node), "Attributes")) <= fields


def test_every_module_and_every_public_function_says_what_it_is_for():
    bare = [file for file in files() if not ast.get_docstring(tree_of(file))]
    bare += [
        f"{file}:{function.name}"
        for file in files()
        for function in tree_of(file).body
        if isinstance(function, (ast.FunctionDef, ast.ClassDef))
        and not function.name.startswith("_")
        and not ast.get_docstring(function)
    ]
    assert bare == []


# --- help ---------------------------------------------------------------------------------------


def test_every_command_and_every_option_has_help():
    lacking = [] if main.help else ["branchwright"]
    for name, command in main.commands.items():
        lacking += [] if command.help else [name]
        lacking += [
            f"{name} {option.opts[0]}"
            for option in command.params
            if isinstance(option, click.Option) and not option.help
        ]
    assert set(main.commands) == {"build", "check", "prove", "rebase", "start"}
    assert lacking == []


@pytest.mark.parametrize("command", [[], *([name] for name in sorted(main.commands))])
def test_help_is_shown_and_fits_a_terminal(command: list[str]):
    result = CliRunner().invoke(main, [*command, "--help"])
    assert result.exit_code == 0
    assert "Usage:" in result.output
    assert max(map(len, result.output.splitlines())) <= 80


def test_the_commands_list_shows_whole_sentences():
    # click cuts a first sentence that is too long with three dots; a cut one tells half
    result = CliRunner().invoke(main, ["--help"])
    listed = result.output.partition("Commands:")[2]
    assert listed
    assert "..." not in listed


# --- README -------------------------------------------------------------------------------------


def blocks(text: str, *languages: str) -> list[str]:
    fenced = re.findall(r"^```(\w*)\n(.*?)^```", text, re.MULTILINE | re.DOTALL)
    return [body for language, body in fenced if language in languages]


def shell_lines(text: str) -> Iterator[str]:
    for block in blocks(text, "sh", "bash", "console", "shell", ""):
        for line in block.replace("\\\n", " ").splitlines():
            yield line.removeprefix("$ ").strip()


def commands(line: str) -> Iterator[list[str]]:
    """Yield the branchwright commands of one shell line, as lists of arguments."""
    parts = shlex.shlex(line, posix=True, punctuation_chars=True)
    parts.whitespace_split = True
    words: list[str] = []
    for word in (*parts, "&&"):
        if not set(word) <= set("&|;<>()"):
            words.append(word)
            continue
        if words and words[0].rsplit("/", 1)[-1] == "branchwright":
            yield words[1:]
        words = []


def readme_commands() -> list[list[str]]:
    return [found for line in shell_lines(text_of("README.md")) for found in commands(line)]


@pytest.fixture
def clone(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with the samples, to run README commands in."""
    shutil.copytree(ROOT / "cases", tmp_path / "cases")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_the_readme_opens_with_the_job():
    first = re.split(r"\n\s*\n", text_of("README.md").strip())[1]
    assert not first.startswith(("#", "!", "[", "<", "```"))
    for word in ("transformer", "test", "per-unit", "pandapower", "regulation"):
        assert word in first


def test_the_readme_has_the_two_commands_for_a_fresh_machine():
    found = [line for line in shell_lines(text_of("README.md")) if "venv" in line]
    assert found == [BUILD, TEST]


def test_the_readme_helps_where_venv_is_missing_or_paths_differ():
    text = text_of("README.md")
    assert "python3-venv" in text
    assert "Windows" in text


def test_the_readme_s_commands_run_one_after_the_other(clone: Path):
    for arguments in readme_commands():
        result = CliRunner().invoke(main, arguments, catch_exceptions=False)
        assert result.exit_code == 0, result.output
        if arguments[0] == "build":
            assert "Proof PASS" in result.output
    assert (clone / ".demo" / "network.json").is_file()


def test_every_command_in_the_readme_is_one_that_the_program_knows():
    found = readme_commands()
    assert {arguments[0] for arguments in found} >= {"build", "check", "start"}
    for arguments in found:
        command = main.get_command(click.Context(main), arguments[0])
        assert command is not None, arguments
        command.make_context(arguments[0], arguments[1:])  # raises on an unknown option or value


def test_a_wrong_command_line_would_be_noticed():
    (arguments,) = commands("branchwright build a.yaml --out b --fast | tee log")
    assert arguments == ["build", "a.yaml", "--out", "b", "--fast"]
    with pytest.raises(click.NoSuchOption):
        main.commands["build"].make_context("build", arguments[1:])


def test_the_readme_names_every_command_and_every_file_that_is_written():
    text = text_of("README.md")
    assert [name for name in main.commands if f"`{name} " not in text] == []
    # taps and zero sequence are in the contract; nothing writes them yet
    later = {"taps.csv", "zero_sequence.csv"}
    assert [name for name in CONTRACT if f"`{name}`" not in text and name not in later] == []


def test_the_readme_s_python_runs(clone: Path):
    found = blocks(text_of("README.md"), "python", "py")
    assert found
    for block in found:
        exec(compile(block, "README.md", "exec"), {})  # our own README


def test_the_readme_warns_before_it_teaches():
    text = text_of("README.md")
    caution = text.index("Caution")
    assert "licensed practice" in text[caution : caution + 800]
    assert "verif" in text or "checks source and result" in text
    assert caution < text.index("## Your own sheet")


def test_the_licence_stands_at_the_end_of_the_readme():
    project = tomllib.loads(text_of("pyproject.toml"))["project"]
    assert project["license"] in ("BSD-3-Clause", {"text": "BSD-3-Clause"})
    last = text_of("README.md").rpartition("\n## ")[2]
    assert last.startswith("Licence (BSD-3-Clause)")
    assert "Redistribution and use in source and binary forms" in last
    assert 'PROVIDED BY THE COPYRIGHT HOLDERS AND CONTRIBUTORS "AS IS"' in last


# --- guide and checks ---------------------------------------------------------------------------


def test_the_guide_lists_every_file_and_the_order_of_the_rooms():
    text = text_of("DEVELOPERS.md")
    names = {Path(file).parts[0].removesuffix(".py") for file in files()} - {"__init__"}
    named = {name for name in names if f"`convert/{name}" in text or f"`{name}.py`" in text
             or f"`{name}/`" in text}  # fmt: skip
    assert named == names
    told = re.search(r"`(cli → .*?errors)`", text, re.DOTALL)
    assert told
    levels = [tuple(room.strip() for room in level.split(",")) for level in told[1].split("→")]
    assert levels == list(ORDER)


def test_the_guide_says_why_each_dependency_is_there():
    project = tomllib.loads(text_of("pyproject.toml"))["project"]
    text = text_of("DEVELOPERS.md").lower()
    wanted = [*project["dependencies"], *project["optional-dependencies"]["test"]]
    names = [re.match(r"[\w.-]+", line)[0].lower() for line in wanted]
    # stubs are listed together
    assert [
        n for n in names if n not in text and not n.startswith(("types-", "pandas-stubs"))
    ] == []


def test_the_guide_ends_with_what_users_will_see_change():
    heads = re.findall(r"^## (.*)$", text_of("DEVELOPERS.md"), re.MULTILINE)
    assert heads[0] == "Where is what"
    assert heads[-1] == "What numbers users will see change"


def test_the_checks_before_landing_run_the_readme_s_own_test_command():
    text = text_of(".ci/run")
    (line,) = [line for line in text.splitlines() if line.startswith("command=")]
    shell = shutil.which("bash")
    assert shell
    done = subprocess.run(
        [shell, "-c", f'{line}; printf %s "$command"'],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=True,
    )
    assert done.stdout == TEST
    assert 'bash -c "$command"' in text


def test_no_file_names_the_machine_that_it_was_written_on():
    listed = [*ROOT.glob("*.md"), *ROOT.glob("cases/**/*"), *ROOT.glob("schemas/*"),
              *HOME.rglob("*.py"), *HOME.rglob("*.csv")]  # fmt: skip
    home = re.compile(r"(?<![\w.])/(?:home|root|Users|work)/")
    named = [path.name for path in listed if path.is_file()
             and home.search(path.read_text(encoding="utf-8"))]  # fmt: skip
    assert named == []


def test_the_package_shows_its_public_names():
    assert set(convert.__all__) <= set(dir(convert))
    for name in convert.__all__:
        assert getattr(convert, name).__doc__, name
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        convert.nothing  # noqa: B018 - the access is the test
