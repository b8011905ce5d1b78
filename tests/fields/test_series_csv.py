"""CSV histories, Kp in all its notations, and every way a file can be wrong."""

from __future__ import annotations

import math
import os
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from fields.errors import InputError
from fields.readers.kp import kp_values
from fields.series import Series, read_series

START = datetime(2027, 3, 4, tzinfo=UTC)
HOURS = ("T00:00:00Z", "T03:00:00Z", "T06:00:00Z", "T09:00:00Z", "T12:00:00Z")


def read(folder: Path, text: str | bytes, **more: object) -> Series:
    path = folder / "kp.csv"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return read_series(path, name="kp", shown_as="kp.csv", **more)  # type: ignore[arg-type]


def line_of(folder: Path, text: str | bytes, **more: object) -> str:
    with pytest.raises(InputError) as caught:
        read(folder, text, **more)
    return str(caught.value)


def outcome(folder: Path, text: bytes) -> Series | str:
    try:
        return read(folder, text, interval_h=3.0)
    except InputError as fault:
        return str(fault)


def table(*cells: str, header: str = "time,kp") -> str:
    return "\n".join([header, *(f"2027-03-04{hour},{cell}" for hour, cell in zip(HOURS, cells))]) + "\n"


def signed(k: int) -> str:
    return f"{(k + 1) // 3}{'o+-'[k % 3]}"


WRITERS = {
    "signed": signed,
    "signed, whole without o": lambda k: signed(k).rstrip("o"),
    "three decimals": lambda k: f"{k / 3:.3f}",
    "two decimals": lambda k: f"{k / 3:.2f}",
    "cut decimals": lambda k: f"{math.floor(k / 3 * 1000) / 1000:.3f}",
    "all digits": lambda k: repr(k / 3),
    "tenths": lambda k: f"{10 * k / 3:.0f}",
    "tenths as floats": lambda k: f"{round(10 * k / 3)}.0",
}


class TestKp:
    @pytest.mark.parametrize("notation", WRITERS)
    def test_all_28_values_come_back_exactly(self, notation: str) -> None:
        cells = [WRITERS[notation](k) for k in range(28)]
        np.testing.assert_array_equal(kp_values(cells, range(28), ""), np.arange(28) / 3)

    @given(st.lists(st.integers(0, 27), min_size=1), st.sampled_from(sorted(WRITERS)))
    def test_any_column_comes_back_exactly(self, thirds: list[int], notation: str) -> None:
        if notation.startswith("tenths"):
            thirds = [*thirds, 4]  # tenths are known by a value above 9
        cells = [WRITERS[notation](k) for k in thirds]
        np.testing.assert_array_equal(kp_values(cells, range(len(cells)), ""), np.array(thirds) / 3)

    @given(st.lists(st.integers(0, 900).filter(lambda n: n % 50), min_size=1))
    def test_decimals_that_are_no_thirds_stand_as_written(self, hundredths: list[int]) -> None:
        numbers = [n / 100 for n in (*hundredths, 450)]
        cells = [f"{number:.2f}" for number in numbers]
        np.testing.assert_array_equal(kp_values(cells, range(len(cells)), ""), numbers)

    def test_one_decimal_stands_as_written(self) -> None:
        np.testing.assert_array_equal(kp_values(["4.7", "3.3", "5"], range(3), ""), [4.7, 3.3, 5.0])

    def test_notations_known_by_heart(self) -> None:
        for cells in (["5-", "5o", "5+"], ["4.667", "5.000", "5.333"], ["4.67", "5", "5.33"], ["47", "50", "53"]):
            np.testing.assert_array_equal(kp_values(cells, range(3), ""), [14 / 3, 5.0, 16 / 3])

    @pytest.mark.parametrize(
        ("cells", "line"),
        [
            (("3", "4", "9.5"), 'line 4 = "9.5": Kp outside 0 to 9, and no column of tenths: line 3 holds "4"'),
            (("3", "7", "9.5"), 'line 4 = "9.5": Kp outside 0 to 9, and not a Kp in tenths'),
            (("47", "45", "3"), 'line 3 = "45": Kp outside 0 to 9, and not a Kp in tenths; 0, 3, 7, 10, 13, 17'),
            (("47", "100", "3"), 'line 3 = "100": Kp outside 0 to 9, and not a Kp in tenths'),
            (("3", "4", "12"), 'line 4 = "12": Kp outside 0 to 9, and no column of tenths: line 3 holds "4"'),
            (("3", "-2", "4"), 'line 3 = "-2": Kp outside 0 to 9'),
            (("3-", "9+", "4o"), 'line 3 = "9+": Kp outside 0 to 9'),
            (("3-", "0-", "4o"), 'line 3 = "0-": Kp outside 0 to 9'),
            (("3-", "4", "4.667"), 'line 4 = "4.667": mixed notations: line 2 holds 3-'),
            (("47", "5-", "50"), 'line 2 = "47": mixed notations: line 3 holds 5-'),
            (("3", "high", "4"), 'line 3 = "high": not a Kp; Kp from 0 to 9, as 5-, as 4.667, or as tenths (47)'),
            (("3", "nan", "4"), 'line 3 = "nan": not a finite number'),
            (("3", "-inf", "4"), 'line 3 = "-inf": not a finite number'),
            (("3", "", "4"), 'line 3 = "": no value of kp; a number; leave out rows without a value'),
        ],
    )
    def test_what_is_no_kp_is_named(self, cells: tuple[str, ...], line: str, tmp_path: Path) -> None:
        assert line_of(tmp_path, table(*cells)).startswith(f"driftrose: kp.csv: {line}")

    def test_the_fill_value_holds_nothing(self, tmp_path: Path) -> None:
        text = table("3", "-1", "4", "5")
        rows = read(tmp_path, text, interval_h=3.0)
        assert rows.driver(START, 6.0, 12.0).at(7.0) == 4.0
        with pytest.raises(InputError, match=r"04T03:00:00Z to 2027-03-04T06:00:00Z \(fill value -1, line 3\)"):
            rows.driver(START, 0.0, 12.0)
        assert line_of(tmp_path, text).startswith(
            "driftrose: kp.csv: series.kp: fill value -1, line 3, 2027-03-04T03:00:00Z; interval_h, or"
        )

    def test_the_column_may_be_called_kp_in_any_case(self, tmp_path: Path) -> None:
        assert read(tmp_path, table("47", "5", header="time,KP").replace(",5\n", ",50\n")).values[0] == 14 / 3


class TestTable:
    @pytest.mark.parametrize(
        "text",
        [
            "time,kp\n2027-03-04T00:00:00Z,3\n2027-03-04T03:00:00Z,4\n",
            "time,kp\n2027-03-04T00:00,3\n2027-03-04 03:00,4",
            "time,kp\r\n2027-03-04T00:00:00Z,3\r\n2027-03-04T03:00:00Z,4\r\n",
            "time,kp\r2027-03-04T00:00:00Z,3\r2027-03-04T03:00:00Z,4\r",
            "\ufefftime,kp\n2027-03-04T00:00:00Z,3\n2027-03-04T03:00:00Z,4\n",
            "# invented\n\n Time , KP \n\n 2027-03-04T00:00:00Z , 3 \n# more\n2027-03-04T03:00:00Z,4\n\n,\n",
            '"time","kp"\n"2027-03-04T00:00:00Z","3"\n"2027-03-04T03:00:00Z",4\n',
            "time;kp\n2027-03-04T00:00:00Z;3\n2027-03-04T03:00:00Z;4\n",
            "time\tkp\n2027-03-04T00:00:00Z\t3\n2027-03-04T03:00:00Z\t4\n",
            "kp,time\n3,2027-03-04T02:00:00+02:00\n4,2027-03-03T22:00:00-05:00\n",
            "time,kp\n20270304T000000Z,3\n2027-03-04T03:00:00.000000+00:00,4\n",
        ],
    )
    def test_one_history_in_many_dresses(self, text: str, tmp_path: Path) -> None:
        rows = read(tmp_path, text)
        np.testing.assert_array_equal(rows.times, np.array(["2027-03-04T00", "2027-03-04T03"], dtype="datetime64[us]"))
        np.testing.assert_array_equal(rows.values, [3.0, 4.0])
        assert rows.quantity.lower() == "kp"

    def test_fractions_of_a_second_stay(self, tmp_path: Path) -> None:
        rows = read(tmp_path, "time,a\n2027-03-04T00:00:00.25Z,1\n2027-03-04T00:00:00.250001Z,2\n")
        np.testing.assert_array_equal(np.diff(rows.times), [np.timedelta64(1, "us")])

    def test_a_column_is_chosen_by_name(self, tmp_path: Path) -> None:
        text = "time,ap,kp\n2027-03-04T00:00:00Z,39,5-\n2027-03-04T03:00:00Z,oops,5o\n"
        assert read(tmp_path, text, column="kp").values[0] == 14 / 3
        assert read(tmp_path, text, column="KP").quantity == "kp"
        assert line_of(tmp_path, text) == (
            "driftrose: series.kp.column: missing: kp.csv has several value columns; one of ap, kp"
        )
        assert line_of(tmp_path, text, column="kpp") == (
            'driftrose: series.kp.column = "kpp": no such value column in kp.csv; did you mean kp'
        )
        assert line_of(tmp_path, text, column="ap").startswith('driftrose: kp.csv: line 3 = "oops": not a number')
        assert "stands twice in the header" in line_of(tmp_path, text.replace("ap", "kp"), column="kp")

    @given(numbers=st.lists(st.floats(allow_nan=False, allow_infinity=False), min_size=2, max_size=5))
    def test_other_quantities_are_plain_numbers(
        self, numbers: list[float], tmp_path_factory: pytest.TempPathFactory
    ) -> None:
        text = table(*map(repr, numbers), header="time,amplitude_kV")
        np.testing.assert_array_equal(read(tmp_path_factory.getbasetemp(), text).values, numbers)

    @pytest.mark.parametrize(
        ("text", "line"),
        [
            ("", "driftrose: kp.csv: empty file; a header and rows of time and value"),
            ("\n \n", "driftrose: kp.csv: empty file; a header and rows of time and value"),
            ("# only\n", "driftrose: kp.csv: holds comments only; a CSV with a header such as time,kp, a GFZ"),
            ("time,kp\n", "driftrose: kp.csv: a header and no rows; at least one row of time and value"),
            ("2027-03-04,3\n", 'driftrose: kp.csv: line 1 = "2027-03-04,3": no header; a first line such as'),
            ("date,kp\n2027-03-04,3\n", 'driftrose: kp.csv: line 1 = "date,kp": no column called time; a CSV with a'),
            ("time\n2027-03-04\n", 'driftrose: kp.csv: line 1 = "time": no value column; a header such as time,kp'),
            ("time,time,kp\n", 'driftrose: kp.csv: line 1 = "time,time,kp": two columns called time'),
            ("lorem ipsum\n", 'driftrose: kp.csv: line 1 = "lorem ipsum": no column called time'),
            ("time,kp\nsoon,3\n", 'driftrose: kp.csv: line 2 = "soon": not a time; ISO 8601 in UTC, as 2027-'),
            ("time,kp\n2027-02-30,3\n", 'driftrose: kp.csv: line 2 = "2027-02-30": not a time'),
            ("time,kp\n2027-03-04,3,4\n", "driftrose: kp.csv: line 2: 3 cells; 2, as in the header"),
            ("time,kp\n2027-03-04\n", "driftrose: kp.csv: line 2: 1 cells; 2, as in the header"),
            ("time,a\n2027-03-04,1e\n", 'driftrose: kp.csv: line 2 = "1e": not a number'),
            ("time,a\n2027-03-04,1_0\n", 'driftrose: kp.csv: line 2 = "1_0": not a number'),
            ("time,a\n2027-03-04,NaN\n", 'driftrose: kp.csv: line 2 = "NaN": not a finite number'),
            ("time,a\n2027-03-04,1e999\n", 'driftrose: kp.csv: line 2 = "1e999": not a finite number'),
            ("time,kp\n2027-03-04,3\n", "driftrose: kp.csv: series.kp: 1 row; two rows or more, or interval_h"),
            (b"time,kp\n2027-03-04,\x003\n", "driftrose: kp.csv: binary, not text"),
            ("time,kp\n".encode("utf-16"), "driftrose: kp.csv: UTF-16 text; save it as UTF-8"),
            (b"time,kp\n2027-03-04,3\xb0\n", "driftrose: kp.csv: line 2: not UTF-8 text; save it as UTF-8"),
            (b"\x89HDF\r\n\x1a\n" + bytes(99), "driftrose: kp.csv: binary, not text"),
            ('time,kp\n"' + "9" * 140_000 + "\n", "driftrose: kp.csv: line 2: not a CSV line (field larger than"),
        ],
    )
    def test_what_is_no_history_is_named(self, text: str | bytes, line: str, tmp_path: Path) -> None:
        assert line_of(tmp_path, text).startswith(line)

    @pytest.mark.parametrize("head", ["", "time,kp\n2027-03-04,", "2024 01 01 ", "BEGIN OBSERVED\n2024 01 01 "])
    @given(tail=st.text(st.sampled_from('0123456789-+o.,;: TZ#\n\r\t"eé'), max_size=60).map(str.encode) | st.binary())
    def test_whatever_stands_there_gives_a_history_or_one_line(
        self, head: str, tail: bytes, tmp_path_factory: pytest.TempPathFactory
    ) -> None:
        told = outcome(tmp_path_factory.getbasetemp(), head.encode() + tail)
        assert isinstance(told, Series) or (told.startswith("driftrose: kp.csv: ") and "\n" not in told)

    @given(data=st.data())
    def test_rows_moved_repeated_or_lost_are_named(
        self, data: st.DataObject, tmp_path_factory: pytest.TempPathFactory
    ) -> None:
        rows = table("1", "2", "3", "4", "5").splitlines()[1:]
        order = data.draw(st.lists(st.integers(0, 4), min_size=1, max_size=6).filter(lambda o: o != [0, 1, 2, 3, 4]))
        text = "\n".join(["time,kp", *(rows[i] for i in order)])
        fault = next((i for i in range(1, len(order)) if order[i] <= order[i - 1]), None)
        folder = tmp_path_factory.getbasetemp()
        if fault is not None:
            assert line_of(folder, text, interval_h=3.0).startswith(
                f'driftrose: kp.csv: line {fault + 2} = "2027-03-04{HOURS[order[fault]]}": '
            )
            return
        lost = min(set(range(5)) - set(order))
        with pytest.raises(InputError, match=f"no value from 2027-03-04{HOURS[lost]} to "):
            read(folder, text, interval_h=3.0).driver(START, 0.0, 15.0)


class TestFile:
    def where(self, path: Path) -> str:
        with pytest.raises(InputError) as caught:
            read_series(path, name="kp", shown_as="data/kp.csv")
        return str(caught.value)

    def test_missing(self, tmp_path: Path) -> None:
        line = 'driftrose: series.kp.file = "data/kp.csv": no such file; a path relative to the run file'
        assert self.where(tmp_path / "none.csv") == line

    def test_a_directory(self, tmp_path: Path) -> None:
        assert self.where(tmp_path) == 'driftrose: series.kp.file = "data/kp.csv": a directory; the name of a text file'

    def test_a_pipe_is_not_waited_for(self, tmp_path: Path) -> None:
        os.mkfifo(tmp_path / "pipe")
        assert "not a regular file; the name of a text file" in self.where(tmp_path / "pipe")

    def test_a_file_in_the_way(self, tmp_path: Path) -> None:
        (tmp_path / "file").write_text("x")
        assert "cannot be read (Not a directory)" in self.where(tmp_path / "file" / "kp.csv")
        assert "cannot be read (File name too long)" in self.where(tmp_path / ("x" * 300))
        assert "cannot be read (embedded null" in self.where(Path("a\0b"))

    @pytest.mark.skipif(os.geteuid() == 0, reason="root may read everything")
    def test_unreadable(self, tmp_path: Path) -> None:
        path = tmp_path / "kp.csv"
        path.write_text(table("3", "4"))
        path.chmod(0)
        assert "may not be read; read permission on it" in self.where(path)

    def test_refused_permission(self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
        path = tmp_path / "kp.csv"
        path.write_text(table("3", "4"))

        def refuse(*_: object, **__: object) -> None:
            raise PermissionError(13, "Permission denied")

        monkeypatch.setattr(Path, "open", refuse)
        assert "may not be read; read permission on it" in self.where(path)

    def test_the_name_defaults_to_the_path(self, tmp_path: Path) -> None:
        path = tmp_path / "kp.csv"
        path.write_text(table("3", "4"))
        assert read_series(path, name="kp").file == str(path)

    @pytest.mark.parametrize("more", [{"hold": "spline"}, {"interval_h": -1.0}])
    def test_keys_are_checked_before_the_file_is_read(self, more: dict, tmp_path: Path) -> None:
        with pytest.raises(InputError, match=f"series.kp.{next(iter(more))} = "):
            read_series(tmp_path / "none.csv", name="kp", **more)
