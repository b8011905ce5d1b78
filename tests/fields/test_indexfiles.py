"""Published index files, against what was published, and against each other."""

from __future__ import annotations

import hashlib
import re
import time
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from published_data import AP_OF_THIRD, cssi_file

from fields.errors import InputError
from fields.readers.kp import TENTHS, from_signed
from fields.series import Series, read_series

DATA = Path(__file__).parents[1] / "data" / "series"
DAILY, NOWCAST, HOURLY, CSSI = (
    DATA / name for name in ("gfz_daily.txt", "gfz_daily_nowcast.txt", "gfz_hourly.txt", "cssi_small.txt")
)


def kp(path: Path, **more: object) -> Series:
    return read_series(path, name="kp", shown_as=path.name, **more)  # type: ignore[arg-type]


def line_of(path: Path, **more: object) -> str:
    with pytest.raises(InputError) as caught:
        kp(path, **more)
    return str(caught.value)


@pytest.fixture(scope="module")
def published() -> Series:
    return read_series(cssi_file(), name="kp", shown_as="SW-All.txt")


class TestCssiFile:
    def test_october_2003(self, published: Series) -> None:
        # Kp of 28-31 October 2003 as GFZ publishes it (from memory). NOAA's account of the storm agrees on the three
        # intervals of Kp 9: 29 October 06-09, 30 October 18-24 (from memory).
        days = """3o 5- 4- 5- 3- 4o 3+ 4o   5- 4o 9o 8o 8- 8- 9- 9-
                  9- 7+ 5+ 5- 5o 7o 9o 9o   8+ 8- 7+ 7- 7+ 5- 4o 4+"""
        driver = published.driver(datetime(2003, 10, 28, tzinfo=UTC), 0.0, 96.0)
        np.testing.assert_array_equal(driver.value, [from_signed(word) for word in days.split()])
        np.testing.assert_array_equal(driver.corners(), np.arange(0.0, 97.0, 3.0))
        np.testing.assert_array_equal(driver.start_h[driver.value == 9.0], [30.0, 66.0, 69.0])

    def test_every_kp_agrees_with_the_ap_beside_it(self, published: Series) -> None:
        """The ap columns are ten fields away and follow from Kp by a published table."""
        observed = cssi_file().read_text().split("BEGIN OBSERVED\n")[1].split("END OBSERVED")[0].splitlines()
        ap = np.array([[int(row[46 + 4 * i : 50 + 4 * i]) for i in range(8)] for row in observed]).ravel()
        assert ap.size == published.values.size == 8 * len(observed)
        np.testing.assert_array_equal(np.array(AP_OF_THIRD)[np.rint(3 * published.values).astype(int)], ap)

    def test_covers_what_was_observed(self, published: Series) -> None:
        assert published.cover == ("1957-10-01T00:00:00Z", "2025-07-21T00:00:00Z")
        assert published.interval_h == 3.0
        assert np.all(np.diff(published.times) == np.timedelta64(3, "h"))

    def test_predictions_are_not_used(self, published: Series) -> None:
        with pytest.raises(InputError) as caught:
            published.driver(datetime(2025, 7, 20, tzinfo=UTC), 0.0, 36.0)
        assert re.match(
            r"driftrose: SW-All\.txt: series\.kp: no value from 2025-07-21T00:00:00Z to 2025-07-21T12:00:00Z "
            r"\(predicted, not observed, line \d+\); the run needs 2025-07-20T00:00:00Z to 2025-07-21T12:00:00Z, ",
            str(caught.value),
        )

    def test_hash_is_of_the_whole_file(self, published: Series) -> None:
        assert published.sha256 == hashlib.sha256(cssi_file().read_bytes()).hexdigest()
        assert published.file == "SW-All.txt"

    def test_is_quick(self) -> None:
        """Measured 0.17 s for its 25,000 days on a quiet machine; processor time, so that a busy one does not count."""
        taken = []
        for _ in range(3):
            begun = time.process_time()
            read_series(cssi_file(), name="kp").driver(datetime(2003, 10, 28, tzinfo=UTC), 0.0, 72.0)
            taken.append(time.process_time() - begun)
        assert min(taken) < 0.5


class TestGfz:
    def test_daily_and_hourly_lines_hold_the_same(self) -> None:
        daily, hourly = kp(DAILY), kp(HOURLY)
        np.testing.assert_array_equal(daily.times, hourly.times)
        np.testing.assert_array_equal(daily.values, hourly.values)
        assert daily.interval_h == hourly.interval_h == 3.0
        assert daily.cover == ("2024-01-01T00:00:00Z", "2024-01-07T00:00:00Z")
        # First line of the published file: 0.667 0.333 0.667 1.333 2.000 3.000 3.333 4.000
        np.testing.assert_array_equal(daily.values[:8], np.array([2, 1, 2, 4, 6, 9, 10, 12]) / 3)

    def test_agrees_with_the_cssi_file_of_another_publisher(self, published: Series) -> None:
        mine = kp(DAILY)
        theirs = published.driver(datetime(2024, 1, 1, tzinfo=UTC), 0.0, 144.0)
        np.testing.assert_array_equal(mine.driver(datetime(2024, 1, 1, tzinfo=UTC), 0.0, 144.0).value, theirs.value)

    def test_a_fill_value_hurts_only_inside_the_span(self) -> None:
        rows = kp(NOWCAST)
        start = datetime(2024, 2, 13, tzinfo=UTC)
        for hold in ("step", "linear"):
            driver = kp(NOWCAST, hold=hold).driver(start, 0.0, 18.0)
            assert driver.end_h == 18.0
            assert driver.at(17.0) == 8 / 3
        with pytest.raises(InputError) as caught:
            rows.driver(start, 0.0, 24.0)
        assert str(caught.value) == (
            "driftrose: gfz_daily_nowcast.txt: series.kp: no value from 2024-02-13T18:00:00Z to 2024-02-14T00:00:00Z "
            "(fill value -1.000, line 8); the run needs 2024-02-13T00:00:00Z to 2024-02-14T00:00:00Z, the rows cover "
            "2024-02-11T00:00:00Z to 2024-02-13T18:00:00Z"
        )

    @pytest.mark.parametrize("path", [DAILY, HOURLY, CSSI])
    def test_takes_no_other_interval_and_no_other_column(self, path: Path) -> None:
        assert kp(path, interval_h=3.0, column="Kp").interval_h == 3.0
        assert line_of(path, interval_h=1.0) == (
            f"driftrose: series.kp.interval_h = 1.0: {path.name} holds values of 3 h; 3, or leave it out"
        )
        assert line_of(path, column="ap") == (
            f'driftrose: series.kp.column = "ap": no such column: {path.name} is read for its kp; kp'
        )

    @pytest.mark.parametrize(
        ("source", "old", "new", "line"),
        [
            (DAILY, " 4.000 ", " 4.500 ", 'line 6 = "4.500": not a Kp; a third from 0 to 9 as 4.667'),
            (DAILY, " 4.000 ", " 9.333 ", 'line 6 = "9.333": Kp outside 0 to 9'),
            (DAILY, " 4.000 ", "   nan ", 'line 6 = "nan": not a Kp'),
            (DAILY, " 4.000 ", " ", "line 6: 27 columns; 10 columns (three hours a line) or 28 (a day a line)"),
            (DAILY, "2024 01 02", "2024 02 30", 'line 7 = "2024 02 30": not a date'),
            (DAILY, "2024 01 02", "2024 01 01", 'line 7 = "2024-01-01T00:00:00Z": out of order'),
            (DAILY, "2024 01 02", "2024 01 03", 'line 8 = "2024-01-03T00:00:00Z": out of order'),
            (HOURLY, "03.0 04.50", "00.0 01.50", 'line 7 = "2024-01-01T00:00:00Z": this time stands twice (line 6)'),
            (HOURLY, "03.0 04.50", "03.0 03.50", 'line 7 = "03.0 03.50": not the start and the middle of a three-hour'),
            (HOURLY, "03.0 04.50", "27.0 28.50", 'line 7 = "27.0 28.50": not the start and the middle of a three-hour'),
        ],
    )
    def test_names_the_line_and_what_stands_there(
        self, source: Path, old: str, new: str, line: str, tmp_path: Path
    ) -> None:
        changed = tmp_path / "changed.txt"
        changed.write_text(source.read_text().replace(old, new, 1))
        assert line_of(changed).startswith(f"driftrose: changed.txt: {line}")

    @given(lost=st.integers(0, 47))
    def test_a_missing_line_is_a_gap(self, lost: int, tmp_path_factory: pytest.TempPathFactory) -> None:
        lines = HOURLY.read_text().splitlines()
        cut = tmp_path_factory.getbasetemp() / "cut.txt"
        cut.write_text("\n".join(lines[: 5 + lost] + lines[6 + lost :]))
        day, hour = divmod(3 * lost, 24)
        with pytest.raises(InputError, match=f"no value from 2024-01-0{day + 1}T{hour:02d}:00:00Z to "):
            kp(cut).driver(datetime(2024, 1, 1, tzinfo=UTC), 0.0, 144.0)


class TestCssiText:
    def test_columns_go_by_position(self) -> None:
        rows = kp(CSSI)
        tenths = [20, 23, 10, 7, 33, 47, 50, 43, 60, 67, 90, 83, 70, 57]
        np.testing.assert_array_equal(rows.values, [TENTHS[number] for number in tenths])
        assert rows.values[5] == 4 + 2 / 3
        assert rows.cover == ("2031-02-01T00:00:00Z", "2031-02-02T18:00:00Z")

    def test_blank_columns_hold_no_value(self) -> None:
        with pytest.raises(InputError, match=r"no value from 2031-02-02T18:00:00Z .*\(left blank, line 9\)"):
            kp(CSSI).driver(datetime(2031, 2, 2, tzinfo=UTC), 0.0, 20.0)

    def test_is_known_by_content(self, tmp_path: Path) -> None:
        for source in (CSSI, DAILY, HOURLY):
            renamed = tmp_path / "history.csv"
            renamed.write_bytes(source.read_bytes())
            np.testing.assert_array_equal(kp(renamed).values, kp(source).values)

    @pytest.mark.parametrize(
        ("old", "new", "line"),
        [
            (" 20 23 ", " 21 23 ", 'line 8 = "21": not a Kp in tenths; 0, 3, 7, 10, 13, 17, ... 90'),
            (" 20 23 ", " 93 23 ", 'line 8 = "93": Kp outside 0 to 9'),
            (" 20 23 ", " 2x 23 ", 'line 8 = "2x": not a Kp in tenths'),
            ("2031 02 02", "2031 02 30", 'line 9 = "2031 02 30": not a date'),
            ("2031 02 02", "2031 02 01", 'line 9 = "2031-02-01T00:00:00Z": out of order'),
            ("BEGIN OBSERVED", "BEGIN SOMETHING", "holds no value of kp; one row or more with a value"),
        ],
    )
    def test_names_the_line_and_what_stands_there(self, old: str, new: str, line: str, tmp_path: Path) -> None:
        changed = tmp_path / "changed.txt"
        changed.write_bytes(CSSI.read_bytes().replace(old.encode(), new.encode(), 1))
        assert line_of(changed).startswith(f"driftrose: changed.txt: {line}")

    def test_a_line_cut_short_is_not_guessed(self, tmp_path: Path) -> None:
        whole = CSSI.read_bytes()
        end = whole.index(b"2031 02 02")
        for length in range(1, 42):
            cut = tmp_path / "cut.txt"
            cut.write_bytes(whole[: end + length])
            text = line_of(cut)
            assert "line 9" in text
            assert "cut short" in text or "not a date" in text
