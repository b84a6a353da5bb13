"""Rows of the bad-input catalogue that show only in a portfolio: a folder in that state, and what is said."""

from pathlib import Path

import pytest
from folders import GIVEN, RECORDS, given_portfolio, recorded_portfolio

from lossagg.batch.checks import check_folder
from lossagg.batch.names import result_names
from lossagg.batch.run import run_batch
from lossagg.errors import FitError, InputError
from lossagg.portfolio import read_portfolio
from lossagg.portfolio.checking import check_portfolio

EXPOSURE = "year,exposure\n2020,100\n2021,100\n2022,100\n2023,100\n2024,100\n"
AS_WRITTEN = RECORDS.replace("reporting-threshold = 1000\ntrend = 0.03\n", "")


def portfolio(
    folder: Path, text: str = RECORDS, rows: list[str] | None = None, exposure: str = EXPOSURE
) -> Path:
    recorded_portfolio(folder, text)
    (folder / "exposure.csv").write_text(exposure)
    if rows is not None:
        (folder / "losses.csv").write_text("\n".join(["id,date,amount", *rows]) + "\n")
    return folder


def said(folder: Path, code: str) -> dict:
    """The one finding of a code in the check of a portfolio."""
    (found,) = (finding for finding in check_portfolio(folder)["findings"] if finding["code"] == code)
    assert found["remedy"]
    return {key: found[key] for key in ("severity", "file", "row", "column", "value", "message")}


def rows(number: int, amount: float = 0.0) -> list[str]:
    """Claims spread evenly over five years, of one amount or of growing ones."""
    return [f"{k},{2020 + k % 5}-03-{1 + k % 28:02d},{amount or 5000 + k * k}" for k in range(number)]


def test_30_a_year_without_exposure_stops(tmp_path: Path) -> None:
    found = said(portfolio(tmp_path, exposure=EXPOSURE.replace("2022,100\n", "")), "preparing")
    assert found["severity"] == "stop"
    assert (found["file"], found["column"], found["value"]) == ("exposure.csv", "exposure", "[2022]")
    assert found["message"] == "the exposure file has no row for 1 of the years observed"


def test_31_a_year_without_losses_stays_a_year(tmp_path: Path) -> None:
    check = check_portfolio(portfolio(tmp_path, rows=[row for row in rows(30) if ",2022-" not in row]))
    years = {year["year"]: year["losses"] for year in check["lines"][0]["by_year"]}
    assert years == {2020: 6, 2021: 6, 2022: 0, 2023: 6, 2024: 6}
    assert check["lines"][0]["window"]["years"] == 5.0


def test_32_exposures_that_are_zero_stop_and_jumps_warn(tmp_path: Path) -> None:
    zero = portfolio(tmp_path / "zero", exposure=EXPOSURE.replace("2022,100", "2022,0"))
    assert said(zero, "exposure-amount") == {
        "severity": "stop",
        "file": "exposure.csv",
        "row": 4,
        "column": "exposure",
        "value": "0",
        "message": "the exposure is missing, zero, negative or infinite",
    }
    jump = portfolio(tmp_path / "jump", exposure=EXPOSURE.replace("2024,100", "2024,1000"))
    found = said(jump, "exposure-jump")
    assert (found["severity"], found["value"]) == ("warning", "100 to 1000")
    assert found["message"] == "the exposure changes tenfold or more from 2023 to 2024"


def test_33_the_year_of_the_valuation_date_counts_in_part(tmp_path: Path) -> None:
    check = check_portfolio(portfolio(tmp_path, RECORDS.replace("2024-12-31", "2024-06-30"), rows(20)))
    last = check["lines"][0]["by_year"][-1]
    assert last["fraction"] == 182 / 366
    assert check["lines"][0]["window"]["until"] == "2024-06-30"


def test_35_no_claims_at_all(tmp_path: Path) -> None:
    """Headings alone stop: they may be an export that failed. A line without a loss takes a given severity
    with its source, a bound or a prior for its rate, and is labelled: `test_without_losses.py`."""
    found = said(portfolio(tmp_path / "empty", rows=[]), "file")
    assert (found["severity"], found["message"]) == ("stop", "the table has headings but no rows")
    nil = portfolio(tmp_path / "nil", rows=["1,2022-05-01,0"])
    assert said(nil, "nil-claim")["message"].startswith("the amount is zero: closed without payment")
    found = said(nil, "no-losses")
    assert (found["severity"], found["file"]) == ("stop", "losses.csv")
    assert found["message"] == "no loss of the line is left, so there is no severity to fit: it must be given"
    with pytest.raises(
        InputError, match=r"no loss of the line is left.*In place of its fit write a prior law"
    ):
        read_portfolio(nil).models()


def test_36_one_claim_supports_no_free_shape(tmp_path: Path) -> None:
    folder = portfolio(tmp_path, AS_WRITTEN.replace(', "exponential"', ""), rows(1))
    with pytest.raises(FitError) as error:
        read_portfolio(folder).models()
    assert "none of the severity families can be fitted" in str(error.value)
    assert "the uncensored losses have 1 distinct amount" in error.value.tried[0]


def test_37_equal_amounts_are_warned_of_and_not_fitted(tmp_path: Path) -> None:
    folder = portfolio(tmp_path, AS_WRITTEN, rows(20, 5000))
    assert said(folder, "equal-amounts")["message"] == "all 20 amounts are equal to 5000"
    with pytest.raises(FitError, match="none of the severity families can be fitted"):
        read_portfolio(folder).models()


def test_38_constant_counts_have_no_negative_binomial(tmp_path: Path) -> None:
    only = portfolio(tmp_path / "only", AS_WRITTEN.replace('"poisson", ', ""), rows(20))
    with pytest.raises(FitError, match="none of the frequency families can be fitted"):
        read_portfolio(only).models()
    (model,) = read_portfolio(portfolio(tmp_path / "both", AS_WRITTEN, rows(20))).models()
    assert model.line.frequency.family == "poisson"


def test_40_a_tail_without_a_mean_is_said(tmp_path: Path) -> None:
    """Quantiles of a Pareto law with tail index 1 / 1.4."""
    text = AS_WRITTEN.replace('"lognormal", "exponential"', '"pareto"')
    heavy = [f"{k},{2020 + k % 5}-03-15,{1000 / (1 - (k + 0.5) / 60) ** 1.4:.2f}" for k in range(60)]
    data = read_portfolio(portfolio(tmp_path, text, heavy)).assess(years=10_000).to_dict()
    assert any(caution["code"] == "infinite-mean" for caution in data["cautions"])
    assert data["gross"]["mean"] is None


def test_51_a_link_out_of_the_folder_is_refused(tmp_path: Path) -> None:
    (tmp_path / "secret.csv").write_text("amount,date\n1,2024-01-01\n")
    folder = portfolio(tmp_path / "inside")
    (folder / "losses.csv").unlink()
    (folder / "losses.csv").symlink_to(tmp_path / "secret.csv")
    found = said(folder, "file")
    assert found["file"] == "portfolio.toml, key 'records'"
    assert found["message"] == "a file of the portfolio must lie in its folder"
    with pytest.raises(InputError, match="must lie in its folder"):
        read_portfolio(folder)


def test_61_two_portfolios_of_one_name_stop_and_none_shares_a_folder(tmp_path: Path) -> None:
    """A batch of them does not begin (tests/batch); results of equal slugs go to different places."""
    for name in ("a", "b"):
        given_portfolio(tmp_path / name)
    given_portfolio(tmp_path / "c", GIVEN.replace("Two lines", "Others"))
    check, _ = check_folder(tmp_path)
    found = {part["folder"]: part["findings"] for part in check["portfolios"]}
    assert [found["a"][0]["message"], found["b"][0]["message"], found["c"]] == [
        "the portfolio bears the name of that in b/portfolio.toml",
        "the portfolio bears the name of that in a/portfolio.toml",
        [],
    ]
    assert [part["counts"]["stop"] for part in check["portfolios"]] == [1, 1, 0]
    assert [part["status"] for part in check["portfolios"]] == ["stopped", "stopped", "usable"]
    with pytest.raises(InputError, match="2 portfolios of the folder bear the same name"):
        run_batch(tmp_path, tmp_path / "out")
    assert not (tmp_path / "out").exists()
    assert len(set(result_names(["Pool A", "pool-a", "POOL_A"]).values())) == 3


@pytest.mark.parametrize(
    ("law", "message"),
    [
        ('{ family = "count-table", probabilities = [0.5, 0.4] }', "probabilities must sum to 1"),
        ('{ family = "count-table", probabilities = [1.5, -0.5] }', "probabilities must"),
        (
            '{ family = "zero-inflated", base = { family = "poisson", mean = 3 }, extra-zeros = 1.5 }',
            "extra_zeros must be a probability",
        ),
    ],
)
def test_67_probabilities_that_do_not_sum_to_one_stop(tmp_path: Path, law: str, message: str) -> None:
    folder = given_portfolio(tmp_path, GIVEN.replace('{ family = "poisson", mean = 4 }', law))
    found = said(folder, "portfolio-file")
    assert (found["severity"], found["file"]) == ("stop", "portfolio.toml, key 'line[1].frequency'")
    assert message in found["message"]
