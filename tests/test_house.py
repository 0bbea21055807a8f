"""The house rules that no other tool checks: documents that run, figures that are measured."""

import re
import shlex
import subprocess
import sys
from pathlib import Path

import pytest

from screening.evidence_table import evidence_markdown
from screening.how_sure import how_sure_markdown
from screening.running import held_out_figures

TOP = Path(__file__).parents[1]
README = (TOP / "README.md").read_text(encoding="utf-8")


def blocks(language):
    return re.findall(rf"```{language}\n(.*?)```", README, re.DOTALL)


def test_the_figures_of_the_readme_are_those_of_the_audit():
    printed = re.search(r"<!-- evidence -->\n(.*?)\n<!-- /evidence -->", README, re.DOTALL)[1]
    assert printed == evidence_markdown()


def test_the_packaged_figures_belong_to_the_packaged_tables():
    assert not held_out_figures().empty


@pytest.mark.parametrize("code", blocks("python"))
def test_python_blocks_of_the_readme_run(code):
    exec(compile(code, "README.md", "exec"), {})  # noqa: S102 - the project's own document


def test_console_blocks_of_the_readme_run(tmp_path):
    for line in "".join(blocks("console")).splitlines():
        program, *arguments = shlex.split(line.removeprefix("$ "))
        assert program == "fewnm"
        done = subprocess.run(
            [sys.executable, "-c", "from screening.cli import main; main()", *arguments],
            cwd=tmp_path,
            capture_output=True,
            text=True,
            check=False,
        )
        assert done.returncode == 0, (line, done.stderr)


def test_the_page_on_how_sure_prints_the_figures_of_the_audit():
    page = (TOP / "docs" / "how-sure.md").read_text(encoding="utf-8")
    assert page == how_sure_markdown()


def test_the_readme_prints_no_measured_figure_outside_the_audits_table():
    section = README.split("## How sure\n", 1)[1].split("\n## ", 1)[0]
    prose = re.sub(r"<!-- evidence -->.*?<!-- /evidence -->", "", section, flags=re.DOTALL)
    assert not re.findall(r"\d+\.\d+|\d+ %|\d+ (?:m?eV|nm)", prose)
