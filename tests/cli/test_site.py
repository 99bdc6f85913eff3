"""The site file on the command line: written by `describe`, used by `examine`."""

from __future__ import annotations

import json
import re

import pytest

from analyzer.records.comtrade import write_comtrade
from analyzer.site import read_site
from tests.cli.files import write_record
from tests.simulated import Case, simulate


@pytest.fixture
def fault(tmp_path):
    """A record with a fault, whose neutral site file is beside it."""
    record, _ = simulate(Case())
    return write_comtrade(record, tmp_path / "fault.cfg", revision=1999, encoding="binary")[0]


def test_describe_writes_a_site_file_that_examine_takes(run, fault, tmp_path):
    site = tmp_path / "site.toml"
    done = run("describe", fault, "--site-template", site)
    assert (done.code, done.err) == (0, "")
    assert "IA" in done.out  # the description is shown as well
    assert read_site(site).terminal[0].currents is not None
    documents = []
    for options in ([], ["--site", site]):
        done = run("examine", fault, *options, "--json", "-")
        assert (done.code, done.err) == (0, "")
        documents.append(json.loads(done.out))
    hows = [document["terminals"][0].pop("how") for document in documents]
    assert hows == ["by-name", "by-site-file"]
    for document in documents:
        document.pop("elapsed_ms")
        document["terminals"][0].pop("confidence")
    assert documents[0] == documents[1]


def test_what_is_filled_in_is_used(run, fault, tmp_path):
    site = tmp_path / "site.toml"
    run("describe", fault, "--site-template", site, "--json", tmp_path / "d.json")
    text = site.read_text(encoding="utf-8")
    filled = text.replace("# z1_ohm = ", "z1_ohm = ").replace(
        'polarity = "out-of-bus"', 'polarity = "into-bus"'
    )
    site.write_text(filled, encoding="utf-8")
    done = run("examine", fault, "--site", site)
    assert done.code == 0
    assert "AG fault, reverse" in done.out
    assert "source-z1-study" in done.out
    assert not done.too_wide


def test_a_site_file_on_standard_output_comes_alone(run, fault, tmp_path):
    done = run("describe", fault, "--site-template", "-")
    assert done.out.startswith("# Site file for faultassay")
    path = tmp_path / "piped.toml"
    path.write_text(done.out, encoding="utf-8")
    read_site(path)
    done = run("describe", fault, "--site-template", "-", "--json", "-")
    assert (done.code, done.out) == (2, "")


def test_a_site_file_that_is_there_is_never_replaced(run, fault, tmp_path):
    site = tmp_path / "site.toml"
    site.write_text("# mine\n", encoding="utf-8")
    done = run("describe", fault, "--site-template", site)
    assert done.code == 2
    assert "is there already" in done.err
    assert site.read_text(encoding="utf-8") == "# mine\n"
    assert run("describe", fault, "--site-template", fault).code == 2


def test_a_template_is_of_one_record(run, fault, tmp_path):
    other = write_record(tmp_path, "other")
    done = run("describe", fault, other, "--site-template", tmp_path / "site.toml")
    assert done.code == 2
    assert "several" in done.err
    assert not (tmp_path / "site.toml").exists()
    done = run("describe", tmp_path / "gone.cfg", "--site-template", tmp_path / "site.toml")
    assert done.code == 3
    assert not (tmp_path / "site.toml").exists()


@pytest.mark.parametrize(
    ("text", "said"),
    [
        (
            "[site]\nnominal_volts = 1\n",
            "line 2: site.nominal_volts: is no key of this section (did you mean",
        ),
        ("[site\n", "line 1: is no valid TOML"),
        (None, "cannot be read"),
    ],
)
def test_a_bad_site_file_is_one_line_and_code_3(run, fault, tmp_path, text, said):
    site = tmp_path / "site.toml"
    if text is not None:
        site.write_text(text, encoding="utf-8")
    done = run("examine", fault, "--site", site)
    assert (done.code, done.out) == (3, "")
    assert len(done.err.splitlines()) == 1
    assert done.err.startswith(str(site))
    assert said in done.err


def test_a_record_that_the_site_file_does_not_fit_does_not_stop_the_others(run, fault, tmp_path):
    other = write_record(tmp_path, "other", names=("J1", "J2", "J3"))
    site = tmp_path / "site.toml"
    site.write_text('[[terminal]]\ncurrents = { a = "IA", b = "IB", c = "IC" }\n', encoding="utf-8")
    target = tmp_path / "findings.json"
    done = run("examine", other, fault, "--site", site, "--json", target, "--quiet")
    assert done.code == 3
    (line,) = done.err.splitlines()
    assert re.search(
        r"site\.toml, line 2: terminal\[0\]\.currents\.a: there is no channel 'IA' in .*other", line
    )
    first, second = json.loads(target.read_text(encoding="utf-8"))
    assert first["error"]["code"] == "no-such-channel"
    assert second["terminals"][0]["how"] == "by-site-file"


def test_options_go_before_the_site_file(run, fault, tmp_path):
    site = tmp_path / "site.toml"
    site.write_text("[site]\nnominal_frequency_hz = 60\n", encoding="utf-8")
    found = []
    for options in ([], ["--nominal-frequency", "50"]):
        done = run("examine", fault, "--site", site, *options, "--json", "-")
        record = json.loads(done.out)["record"]
        codes = {problem["code"] for problem in record["problems"]}
        found.append((record["nominal_frequency_hz"], "frequency-contradicted" in codes))
    assert found == [(60.0, True), (50.0, False)]


def test_findings_do_not_replace_the_site_file(run, fault, tmp_path):
    site = tmp_path / "site.toml"
    site.write_text("[site]\n", encoding="utf-8")
    done = run("examine", fault, "--site", site, "--json", site)
    assert done.code == 2
    assert site.read_text(encoding="utf-8") == "[site]\n"
