"""Matrix files: the same table in every form, and each way of being wrong. Expected tables are by hand."""

from __future__ import annotations

from decimal import Decimal
from pathlib import Path

import pytest

from ngm.errors import ScenarioError
from ngm.scenario.csvfile import MatrixFileError, read_matrix_file, table_of
from ngm.scenario.file import load
from tests.scenario.models import GROUPED, changed

GROUPS = ("a", "b", "c 1")
TABLE = ((1, 2, 3), (4, 5, 6), (7, 8, Decimal("9.5")))


@pytest.mark.parametrize(
    "text",
    [
        "1,2,3\n4,5,6\n7,8,9.5\n",
        "1;2;3\n4;5;6\n7;8;9.5",
        "1\t2\t3\r\n4\t5\t6\r\n\r\n7\t8\t9.5\r\n",
        " 1, 2, 3\n 4, 5, 6\n 7, 8, 9.5",
        ",a,b,c 1\na,1,2,3\nb,4,5,6\nc 1,7,8,9.5\n",
        "from/to, a , b , c 1 \na,1,2,3\nb,4,5,6\n c 1,7,8,9.5\n",
        'x,b,"c 1",a\nc 1,8,9.5,7\na,2,3,1\nb,5,6,4\n',
        "a,b,c 1\na,1,2,3\nb,4,5,6\nc 1,7,8,9.5\n",
        "a,b,c 1\n1,2,3\n4,5,6\n7,8,9.5\n",
        "from,to,value\n"
        + "".join(
            f"{g},{h},{v}\n" for g, row in zip(GROUPS, TABLE, strict=True) for h, v in zip(GROUPS, row, strict=True)
        ),
        "".join(
            f"{g},{h},{v}\n" for g, row in zip(GROUPS, TABLE, strict=True) for h, v in zip(GROUPS, row, strict=True)
        ),
        "value;To;From\n"
        + "".join(
            f"{v};{h};{g}\n"
            for g, row in zip(GROUPS, TABLE, strict=True)
            for h, v in reversed(list(zip(GROUPS, row, strict=True)))
        ),
    ],
)
def test_forms(text: str) -> None:
    assert table_of(text, GROUPS) == TABLE


@pytest.mark.parametrize(
    ("text", "groups", "table"),
    [
        ("1,2\n3,4", ("1", "2"), ((1, 2), (3, 4))),
        (",1,2\n1,5,6\n2,7,8", ("1", "2"), ((5, 6), (7, 8))),
        ("from,to,value\nx,x,1\nx,y,2\ny,x,3\ny,y,4", ("x", "y"), ((1, 2), (3, 4))),
        ("3", ("x",), ((3,),)),
        (",x\nx,3", ("x",), ((3,),)),
        ("from,to,value\nx,x,3", ("x",), ((3,),)),
        ("x,x,3", ("x",), ((3,),)),
        ("x,1,2\ny,3,4", ("x", "y"), ((1, 2), (3, 4))),
        ("1e-3,0\n0,1E2", ("x", "y"), ((Decimal("0.001"), 0), (0, 100))),
    ],
)
def test_small_and_numeric_labels(text: str, groups: tuple[str, ...], table: object) -> None:
    assert table_of(text, groups) == table


@pytest.mark.parametrize(
    ("text", "part"),
    [
        ("", "the file is empty"),
        ("\n\n", "the file is empty"),
        ("1,2\n3,4", "2 lines of 2 cells for 3 groups"),
        ("1,2,3,4\n5,6,7,8\n9,1,2,3\n4,5,6,7", "4 lines of 4 cells for 3 groups"),
        ("1,2,3\n4,5\n7,8,9", "line 2 has 2 cells, others have 3"),
        ("1,2,3\n4,5,6\n7,8,-9", "line 3, column 3: -9 is negative"),
        ("1,2,3\n4,x,6\n7,8,9", "line 2, column 2: 'x' is not a number"),
        ("1,2,3\n4,,6\n7,8,9", "line 2, column 2: the cell is empty"),
        ("1,2,3\n4,nan,6\n7,8,9", "line 2, column 2: 'nan' is not a number"),
        ("1,2,3\n4,inf,6\n7,8,9", "'inf' is not a number"),
        ("1,2,3\n4,1_0,6\n7,8,9", "'1_0' is not a number"),
        ("1,2,3\n4,1e300,6\n7,8,9", "1e300 is too large"),
        ("1;2;3\n4;0,5;6\n7;8;9", "'0,5' is not a number. Write a decimal with a point: 0.5."),
        (",a,b,d\na,1,2,3\nb,4,5,6\nc 1,7,8,9", "column 3: 'd' is not a group. The groups: a, b, c 1."),
        (",a,b,c 1\na,1,2,3\nb,4,5,6\nd,7,8,9", "row 3: 'd' is not a group"),
        (",a,b,b\na,1,2,3\nb,4,5,6\nc 1,7,8,9", "column 3: 'b' stands twice"),
        (",a,b\na,1,2\nb,4,5", "there is no column for c 1"),
        ("b,1,2,3\na,4,5,6\nc 1,7,8,9", "the rows have labels in another order than the groups"),
        ("1,2,3\n4,٥,6\n7,8,9", "line 2, column 2: '٥' is not a number"),
        ("c 1,b,a\n1,2,3\n4,5,6\n7,8,9", "another order than the groups"),
        ("from,to,value\na,b,1\na,b,2", "line 3: from 'a' to 'b' stands twice"),
        ("from,to,value\na,b,1", "there is no value from 'a' to 'a'"),
        ("from,to,value\na,z,1", "line 2, column 2: 'z' is not a group"),
        ("from,to,value\na,b,-1", "line 2, column 3: -1 is negative"),
        ("from,to,value\na,b", "line 2 has 2 cells. Expected three"),
        ('1,2,3\n4,5,"6\n7,8,9', "cannot be read as CSV"),
        ("x" * 200_000, "cannot be read as CSV"),
    ],
)
def test_wrong_files(text: str, part: str) -> None:
    with pytest.raises(MatrixFileError) as caught:
        table_of(text, GROUPS)
    assert part in str(caught.value)
    assert len(str(caught.value)) < 400


def test_places(tmp_path: Path) -> None:
    folder = tmp_path / "model"
    folder.mkdir()
    (tmp_path / "secret.csv").write_text("1", encoding="utf-8")
    (folder / "ok.csv").write_bytes(b"\xef\xbb\xbf1")
    (folder / "latin.csv").write_bytes(b"\xe9")
    (folder / "sub").mkdir()
    (folder / "sub" / "ok.csv").write_text("2", encoding="utf-8")
    (folder / "link.csv").symlink_to(tmp_path / "secret.csv")
    (folder / "loop.csv").symlink_to(folder / "loop.csv")
    assert read_matrix_file(str(folder), "ok.csv", ("x",)) == ((1,),)
    assert read_matrix_file(str(folder), "sub/ok.csv", ("x",)) == ((2,),)
    for file, part in [
        ("../secret.csv", "outside"),
        ("sub/../../secret.csv", "outside"),
        (str(tmp_path / "secret.csv"), "outside"),
        ("link.csv", "outside"),
        ("..\\secret.csv", "outside"),
        ("none.csv", "no such file"),
        ("sub", "not a file"),
        ("", "empty"),
        ("latin.csv", "line 1 is not UTF-8"),
        ("a\0b", ""),
        ("loop.csv", ""),
        ("x" * 5000, ""),
    ]:
        with pytest.raises(MatrixFileError) as caught:
            read_matrix_file(str(folder), file, ("x",))
        assert part in str(caught.value)
    with pytest.raises(MatrixFileError, match="not in a folder"):
        read_matrix_file(None, "ok.csv", ("x",))


def test_size_limit(tmp_path: Path) -> None:
    with (tmp_path / "large.csv").open("wb") as stream:
        stream.truncate(64_000_001)
    with pytest.raises(MatrixFileError, match="larger than 64 MB"):
        read_matrix_file(str(tmp_path), "large.csv", ("x",))


def test_a_scenario_reads_its_files(tmp_path: Path) -> None:
    text = changed(GROUPED, "values = [[1, 2], [3, 4]]\n", 'file = "c.csv"\n')
    text = changed(
        text, "values = [[[1, 2], [3, 4]], [[1, 2], [3, 4]], [[1, 2], [3, 4]]]", 'file = ["c.csv", "c.csv", "m.csv"]'
    )
    (tmp_path / "c.csv").write_text(",old,young\nold,4,3\nyoung,2,1\n", encoding="utf-8")
    (tmp_path / "m.csv").write_text("5,6\n7,8\n", encoding="utf-8")
    path = tmp_path / "model.toml"
    path.write_text(text, encoding="utf-8")
    scenario = load(path)
    assert scenario.matrices["C"].blocks == (((1, 2), (3, 4)),)
    assert scenario.matrices["M"].blocks[2] == ((5, 6), (7, 8))
    assert scenario.matrices["M"].file == ("c.csv", "c.csv", "m.csv")
    (tmp_path / "m.csv").write_text("5,6\n7,x\n", encoding="utf-8")
    with pytest.raises(ScenarioError, match=r"matrices\.M, file, 'm\.csv': line 2, column 2: 'x' is not a number"):
        load(path)


def test_a_thousand_groups_read_in_about_a_second() -> None:
    line = ",".join(str(i / 1000) for i in range(1000))
    text = "\n".join([line] * 1000)
    table = table_of(text, tuple(str(i) for i in range(1000)))
    assert table[999][1] == Decimal("0.001")
