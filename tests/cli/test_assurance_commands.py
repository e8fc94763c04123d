"""``uncertainty``, ``window`` and ``robustness`` at the shell: words, JSON, exit codes."""

import json
from pathlib import Path

import pytest
from click.testing import CliRunner

from wideberth.cli import main

STUDIES = Path(__file__).parents[2] / "studies" / "process"
DEMO = str(STUDIES / "hydrogenation")


def _run(*arguments):
    return CliRunner().invoke(main, [str(a) for a in arguments])


@pytest.mark.parametrize(
    ("command", "keys"),
    [
        (
            "uncertainty",
            {
                "draws",
                "feasible_share",
                "edge_share",
                "region",
                "possible_loss",
                "conformance",
                "optimism",
            },
        ),
        ("window", {"status", "ranges", "relative_volume", "stopped_by", "singly"}),
        ("robustness", {"responses", "conformance"}),
    ],
)
def test_json_holds_what_is_promised_and_is_the_same_every_time(command, keys):
    draws = () if command == "window" else ("--draws", "200")
    result = _run(command, DEMO, "--json", *draws)
    assert result.exit_code == 0
    content = json.loads(result.stdout)
    assert content["command"] == command
    assert keys <= set(content)
    assert "NaN" not in result.stdout
    assert _run(command, DEMO, "--json", *draws).stdout == result.stdout


def test_shapes_of_the_json():
    sure = json.loads(_run("uncertainty", DEMO, "--json", "--draws", "200").stdout)
    assert set(sure["region"]) >= {"level", "determined", "share_of_explored", "ranges"}
    assert set(sure["possible_loss"]) == {"median", "bound"}
    assert set(sure["conformance"]) >= {"mean", "lower"}
    assert set(sure["optimism"]) >= {"desirability", "corrected"}
    box = json.loads(_run("window", DEMO, "--json").stdout)
    assert set(box["stopped_by"]["catalyst"]) == {"low", "high"}
    answer = json.loads(_run("robustness", DEMO, "--json", "--draws", "200").stdout)
    one = answer["responses"]["yield"]
    assert set(one) >= {"shift", "sd_setting", "sd_batch", "sd_total", "shares"}


def test_words_say_what_matters():
    text = _run("uncertainty", DEMO, "--draws", "200", "--quiet").stdout
    for words in ("95 % sure", "of 100 batches", "overall desirability", "hazard review"):
        assert words in text
    text = _run("window", DEMO, "--quiet").stdout
    for words in ("proven over the whole box", "do not hold together", "heat_rate high"):
        assert words in text
    text = _run("robustness", DEMO, "--draws", "200", "--quiet").stdout
    for words in ("sd setting", "No tolerance is worth tightening", "catalyst"):
        assert words in text


@pytest.mark.parametrize("command", ["uncertainty", "window", "robustness"])
def test_a_setting_of_ones_own_and_a_wrong_one(command):
    good = _run(command, DEMO, "--at", "catalyst=1.3,pressure=9,substrate=140", "--quiet")
    assert good.exit_code == 0
    assert "catalyst 1.30 wt%" in good.stdout
    bad = _run(command, DEMO, "--at", "catalyst=1.3,presure=9,substrate=140", "--quiet")
    assert bad.exit_code == 2
    assert "presure" in bad.stderr
    assert "Traceback" not in bad.output


def test_no_window_exits_3_and_says_what_must_give():
    result = _run("window", DEMO, "--at", "catalyst=1.48,pressure=9.8,substrate=140", "--quiet")
    assert result.exit_code == 3
    assert "No window" in result.stdout
    assert "must give" in result.stdout


def test_too_few_draws_are_refused():
    result = _run("uncertainty", DEMO, "--draws", "5")
    assert result.exit_code == 2
    assert "100" in result.output
