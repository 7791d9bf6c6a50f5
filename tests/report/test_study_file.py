"""The study file: what it may say, and what is said of what it may not."""

import tomllib
from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest

import bayesmed as bm
from bayesmed.core.errors import StudyFileError
from bayesmed.examples import example_study_file
from bayesmed.priors import panel
from bayesmed.report.study_file import TOP, FitRequest, read_study_file

Write = Callable[..., Path]


def test_the_example_reads() -> None:
    asked = read_study_file(example_study_file("knee_rehab"))
    assert asked.contrast == (0, 1)
    assert asked.at == {"confidence": [4, 6, 8]}
    assert asked.beliefs["drive helps both"] == bm.TruncatedNormal(0.25, 0.15)
    assert next(iter(asked.beliefs.values())) == bm.PointMass(0.0)
    assert asked.claim == bm.Claim("indirect", above=0.0, required=0.95)
    assert asked.fit == FitRequest(random_seed=20250301)
    assert asked.observe().rows.used == 230


def test_left_out_tables_take_their_defaults(study_file: Write) -> None:
    asked = read_study_file(study_file())
    assert asked.title == "study"
    assert asked.beliefs == panel()
    assert not asked.own_beliefs
    assert asked.claim == bm.Claim()
    assert (asked.at, asked.contrast, asked.moderators, asked.coefficients) == (None, None, None, None)
    assert asked.fit == FitRequest("nuts", 1000, 1000, 4, None)
    assert asked.ci_prob == 0.95


def test_an_empty_at_averages_over_all_rows(study_file: Write) -> None:
    assert read_study_file(study_file("[at]\n")).at == {}


def test_everything_a_file_can_say(study_file: Write) -> None:
    rest = """
    title = "All of it"
    contrast = [1, 0]
    moderators = ["confidence"]
    ci_prob = 0.9
    [beliefs]
    "a | b <i>" = 0.3
    [claim]
    effect = "direct"
    below = 2
    required = 0.8
    [at]
    confidence = 7
    [fit]
    method = "exact"
    draws = 10
    chains = 2
    random_seed = 0
    learn = false
    [coefficients]
    sigma_outcome = { family = "HalfNormal", scale = 20 }
    [coefficients.outcome]
    exercise = { family = "Normal", mean = 0, sd = 0.1 }
    """
    asked = read_study_file(study_file(rest))
    assert asked.title == "All of it"
    assert asked.contrast == (1, 0)
    assert asked.moderators == ("confidence",)
    assert asked.beliefs == {"a | b <i>": bm.PointMass(0.3)}
    assert asked.claim == bm.Claim("direct", below=2, required=0.8)
    assert asked.at == {"confidence": 7}
    assert asked.fit == FitRequest("exact", 10, 1000, 2, 0, learn=False)
    assert asked.coefficients == bm.Coefficients(
        outcome={"exercise": bm.Normal(0, 0.1)}, sigma_outcome=bm.HalfNormal(20)
    )


@pytest.mark.parametrize(
    ("rest", "message"),
    [
        ('titel = "x"', "titel is not known; allowed at the top are title, data"),
        ('titel = "x"', "did you mean 'title'"),
        ("[fit]\ndrawz = 5", "fit.drawz is not known; allowed here are method, draws.*did you mean 'draws'"),
        ("[claim]\nabov = 0", "claim.abov is not known.*did you mean 'above'"),
        ("[coefficients]\nmediatr = 1", "coefficients.mediatr is not known.*did you mean 'mediator'"),
        (
            '[beliefs]\nsceptic = {family = "TruncatedNormal", mean = 0.3, sdd = 0.1}',
            r"beliefs\.sceptic\.sdd is 0.1.*did you mean 'sd'",
        ),
        ('[beliefs]\nx = {family = "Unifrm"}', r"beliefs\.x\.family is 'Unifrm'.*did you mean 'Uniform'"),
        ('[beliefs]\nx = "wide"', r"beliefs\.x is 'wide'"),
        ("[beliefs]\nx = 1.5", r"beliefs\.x is 1.5; .* between -1 and 1"),
        ("[beliefs]", "beliefs is empty"),
        ('[beliefs]\n" " = 0', "beliefs has the label ' '"),
        ("beliefs = 0.3", "beliefs is the number 0.3; it must be a table, as in \\[beliefs\\]"),
        ('[fit]\ndraws = "many"', 'fit.draws is the text "many"; it must be a whole number of at least 4'),
        ("[fit]\ndraws = 2", "fit.draws is the number 2; it must be a whole number of at least 4"),
        ("[fit]\ndraws = true", "fit.draws is the truth value true; it must be a whole number"),
        ("[fit]\nchains = 1.5", "fit.chains is the number 1.5; it must be a whole number of at least 1"),
        ("[fit]\nrandom_seed = -1", "fit.random_seed is the number -1; it must be a whole number of at least 0"),
        ("[fit]\nlearn = 1", "fit.learn is the number 1; it must be true or false"),
        ('[fit]\nmethod = "fast"', 'fit.method is the text "fast"; it must be "nuts" or "exact"'),
        ("contrast = [0, 1, 2]", r"contrast is the list \[0, 1, 2\]; it must be a list of two values"),
        ("contrast = 2020-01-01", "contrast is the date or time 2020-01-01; it must be a list of two values"),
        ('moderators = "age"', 'moderators is the text "age"; it must be a list of names'),
        ("ci_prob = 95", "ci_prob is the number 95; it must be a probability between 0 and 1"),
        ('ci_prob = "0.95"', 'ci_prob is the text "0.95"; it must be a number'),
        ("title = 3", "title is the number 3; it must be text that is not blank"),
        ("[at]\nconfidence = {low = 1}", "at.confidence is a table; it must be a number, text or truth value"),
        ("[at]\nconfidence = [[1]]", r"at.confidence is the list \[\[1\]\]; it must be"),
        ('[claim]\neffect = "indirct"', "claim: effect='indirct' is not known; allowed are indirect"),
        ("[claim]\nabove = 0\nbelow = 1", "claim: above=0 and below=1 were both given"),
        ("[claim]\nrequired = 0.2", "claim: required=0.2"),
        ("[coefficients.outcome]\nexercise = 3", r"coefficients\.outcome\.exercise is 3; a table"),
        (
            '[coefficients]\nsigma_outcome = {family = "Normal", mean = 0, sd = 1}',
            "coefficients: .*sigma_outcome",
        ),
        ("draws = ", "study.toml is not valid TOML: "),
    ],
)
def test_what_is_not_allowed_is_named_with_its_place(study_file: Write, rest: str, message: str) -> None:
    with pytest.raises(StudyFileError, match=message) as raised:
        read_study_file(study_file(rest))
    assert str(raised.value).startswith("study.toml")


@pytest.mark.parametrize("missing", ["exposure", "mediator", "outcome", "data"])
def test_what_is_missing_is_named(study_file: Write, missing: str) -> None:
    path = study_file()
    kept = [line for line in path.read_text().splitlines() if not line.startswith(missing)]
    path.write_text("\n".join(kept))
    with pytest.raises(StudyFileError, match=f"study.toml: {missing} is missing; it must be text"):
        read_study_file(path)


def test_paths_that_lead_nowhere(study_file: Write, tmp_path: Path) -> None:
    with pytest.raises(StudyFileError, match=r"study file '.*none.toml' cannot be read: No such file"):
        read_study_file(tmp_path / "none.toml")
    path = study_file()
    text = path.read_text()
    path.write_text(text.replace("data.csv", "other.csv"))
    with pytest.raises(StudyFileError, match=r"data is 'other.csv', but there is no file '.*other.csv'"):
        read_study_file(path)
    path.write_text(text.replace("data.csv", "data.xlsx"))
    with pytest.raises(StudyFileError, match=r'data is the text "data.xlsx"; it must be the path of a .csv'):
        read_study_file(path)


def test_a_file_that_is_not_utf8(tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    path.write_bytes('title = "é"'.encode("latin-1"))
    with pytest.raises(StudyFileError, match="byte 9 is not UTF-8"):
        read_study_file(path)


def test_a_byte_order_mark_does_no_harm(study_file: Write) -> None:
    path = study_file()
    path.write_bytes(b"\xef\xbb\xbf" + path.read_bytes())
    assert read_study_file(path).exposure == "coaching"


def test_parquet_and_csv_hold_the_same(study_file: Write, tmp_path: Path) -> None:
    path = study_file()
    pd.read_csv(tmp_path / "data.csv").to_parquet(tmp_path / "data.parquet")
    from_csv = read_study_file(path).observe()
    path.write_text(path.read_text().replace("data.csv", "data.parquet"))
    from_parquet = read_study_file(path).observe()
    pd.testing.assert_frame_equal(from_csv.frame, from_parquet.frame)


@pytest.mark.parametrize(("name", "content"), [("data.csv", b""), ("data.parquet", b"not parquet")])
def test_data_that_cannot_be_read(study_file: Write, tmp_path: Path, name: str, content: bytes) -> None:
    path = study_file()
    path.write_text(path.read_text().replace("data.csv", name))
    (tmp_path / name).write_bytes(content)
    with pytest.raises(StudyFileError, match=f"study.toml: data '{name}' cannot be read: "):
        read_study_file(path).frame()


def test_the_words_at_the_top_are_those_of_study_and_compare() -> None:
    """So that what one knows of the calls serves for the file, and the other way round."""
    import inspect

    calls = set(inspect.signature(bm.Study).parameters) | set(inspect.signature(bm.Fit.compare).parameters)
    assert set(TOP) - calls == {"title", "fit", "coefficients"}
    fit = set(inspect.signature(bm.Study.fit).parameters)
    assert set(FitRequest.__dataclass_fields__) <= fit


def test_the_documented_keys_are_those_read() -> None:
    documented = read_study_file.__doc__ or ""
    assert all(key in documented for key in TOP)
    assert set(tomllib.loads(example_study_file("knee_rehab").read_text(encoding="utf-8"))) <= set(TOP)
