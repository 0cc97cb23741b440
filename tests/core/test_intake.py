"""From bytes to a table: odd files, what is decided, what is said and what is refused."""

import json

import numpy as np
import pytest

from evalcore.errors import TableError
from evalcore.intake import copies, make_table, noun_from
from evalcore.sheet import Sheet, read_sheet
from evalcore.table import Roles, SetAside
from evalcore.wording import CASE, Noun

from .checks import DATA, exactly

ODD = DATA / "odd_files"


def odd_sheet(name):
    return read_sheet((ODD / name).read_bytes(), name)


def odd_table(name, label="class"):
    return make_table(odd_sheet(name), Roles(label))


def sheet_of(text, name="made.csv"):
    return read_sheet(text.encode(), name)


def table_of(text, label="class", **roles):
    return make_table(sheet_of(text), Roles(label, **roles))


def numeric(table):
    return [column.name for column in table.columns if column.kind == "number"]


class TestOddFiles:
    def test_byte_order_mark(self):
        sheet = odd_sheet("01_utf8_bom.csv")
        assert sheet.header == ("x1", "x2", "x3", "class")
        assert sheet.notices == ()
        assert (len(sheet.rows), len(sheet.header)) == (40, 4)

    def test_not_utf8(self):
        table = odd_table("03_latin1.csv")
        assert table.notices == (
            "Not UTF-8; read as Windows-1252, so that e.g. ‘température’ is one entry.",
        )
        assert table.classes == ("guéri", "malade")
        assert numeric(table) == ["température", "x2", "x3"]
        assert table.n_cases == 40

    def test_semicolon_and_decimal_comma(self):
        table = odd_table("04_semicolon_decimal_comma.csv")
        assert table.notices == ("Columns are separated by semicolon, decimals by comma.",)
        assert numeric(table) == ["x1", "x2", "x3"]
        assert table.features[:2].tolist() == [[0.189, -0.523, -0.413], [-1.241, 3, 2.344]]

    def test_newlines_in_quotes(self):
        table = odd_table("06_quoted_newlines.csv")
        assert table.n_cases == 40
        # a row starts on every second line of the file
        assert table.lines.tolist() == list(range(2, 82, 2))
        assert table.left_out == ("note",)
        assert table.notices == (
            "Left out ‘note’: it has a different text in every row, like an identifier or a "
            "remark.",
        )

    def test_a_name_twice(self):
        table = odd_table("07_duplicate_headers.csv")
        assert numeric(table) == ["x1", "x1 (2)", "x2"]
        assert table.features[0].tolist() == [0.346, 0.822, 0.330]
        assert table.notices == ("The column name ‘x1’ came twice; one is now ‘x1 (2)’.",)

    def test_rows_of_other_widths(self):
        message = (
            "Rows of ‘09_ragged_rows.csv’ differ in width: the header has 4 values, line 6 has 5, "
            "line 10 has 2. Nothing was read."
        )
        with pytest.raises(TableError, match=exactly(message)):
            odd_sheet("09_ragged_rows.csv")

    def test_header_alone(self):
        message = "No cases: ‘10_header_only.csv’ has a header and no rows."
        with pytest.raises(TableError, match=exactly(message)):
            odd_sheet("10_header_only.csv")

    @pytest.mark.parametrize(
        ("name", "line"), [("12_binary_renamed.csv", 2), ("36_nul_bytes.csv", 1)]
    )
    def test_no_text(self, name, line):
        message = (
            f"‘{name}’ is not a text table: line {line} holds bytes that no text has. Save it as "
            "CSV (UTF-8) and try again."
        )
        with pytest.raises(TableError, match=exactly(message)):
            odd_sheet(name)

    def test_one_class(self):
        message = "The column ‘class’ holds one class only (‘a’); at least two are needed."
        with pytest.raises(TableError, match=exactly(message)):
            odd_table("14_one_class.csv")

    def test_missing_labels(self):
        table = odd_table("16_missing_labels.csv")
        assert table.set_aside == (SetAside("no label (lines 5, 9, 13)", 3),)
        assert (table.rows_read, table.n_cases) == (40, 37)
        assert table.classes == ("a", "b")
        assert not {5, 9, 13} & set(table.lines.tolist())

    def test_a_column_without_values(self):
        table = odd_table("17_all_missing_column.csv")
        assert numeric(table) == ["x1", "x3"]
        assert table.left_out == ("x2",)
        assert table.notices == ("Left out ‘x2’: it has no values.",)

    def test_a_column_that_numbers_the_rows(self):
        table = odd_table("19_id_column.csv")
        assert numeric(table) == ["x1", "x2", "x3"]
        assert table.notices == ("Left out ‘patient_id’: it numbers the rows.",)

    def test_rows_entered_twice_can_be_set_aside(self):
        sheet = odd_sheet("23_exact_duplicates.csv")
        assert copies(sheet, Roles("class")) == (set(range(40, 80)), set())
        table = make_table(sheet, Roles("class", copies="set_aside"))
        assert table.set_aside == (SetAside("entered twice", 40),)
        assert make_table(sheet, Roles("class")).n_cases == 80

    def test_values_that_are_not_finite(self):
        table = odd_table("25_inf_values.csv")
        assert numeric(table) == ["x1", "x2", "x3"]
        # lines 6, 11 and 16 hold inf, -Infinity and 1e999, which no float can hold either
        assert not np.isinf(table.features).any()
        assert table.lines[np.isnan(table.features[:, 0])].tolist() == [6, 11, 16]
        (notice,) = table.notices
        for entry in ("‘inf’", "‘-Infinity’", "‘1e999’"):
            assert entry in notice

    def test_yes_and_no(self):
        table = odd_table("27_booleans.csv")
        assert table.classes == ("False", "True")
        assert [(c.name, c.kind, c.categories) for c in table.columns] == [
            ("smoker", "text", ("FALSE", "TRUE")),
            ("treated", "text", ("no", "yes")),
            ("x3", "number", ()),
        ]
        assert table.notices == ()

    def test_numbers_mixed_with_words(self):
        table = odd_table("28_mixed_types.csv")
        assert numeric(table) == ["x1", "x2", "x3"]
        assert int((~np.isnan(table.features[:, 0])).sum()) == 32
        assert table.notices == (
            "‘x1’ is read as numbers; 6 other entries (‘-’, ‘12 mg’, ‘<0.1’ and ‘?’) count as "
            "missing.",
        )

    def test_formulas_stay_text(self):
        table = odd_table("30_formula_injection.csv")
        assert table.classes == ("+1+1", '=HYPERLINK("http://example.invalid","x")')
        assert numeric(table)[0] == "=cmd|'/C calc'!A0"
        assert table.features[1, 0] == -0.103

    def test_markup_stays_text(self):
        table = odd_table("31_html_in_names.csv", "<b>class</b>")
        assert table.classes == (
            "</td></table><script>alert(2)</script>",
            "<i>ill</i>&amp;",
        )
        assert numeric(table)[:2] == [
            "<script>document.title='pwned'</script>",
            'x2"><img src=x onerror=alert(1)>',
        ]

    def test_names_that_look_alike_stay_apart(self):
        table = odd_table("33_rtl_and_combining.csv")
        assert table.classes == ("cafe\u0301", "caf\u00e9")
        assert numeric(table) == ["ملاحظة", "x2", "e\u0301tat"]

    def test_no_header(self):
        table = odd_table("39_no_header.csv", "a")
        assert table.n_cases == 39
        assert table.notices == (
            "The first line is taken as the header, but ‘0.346’ looks like a reading. If the file "
            "has no header, add one; else its first case is lost.",
        )

    def test_a_label_that_is_a_measurement(self):
        message = (
            "The column ‘class’ holds 40 different numbers in 40 rows; that looks like a "
            "measurement, not a class. Choose another column, or write the classes into one."
        )
        with pytest.raises(TableError, match=exactly(message)):
            odd_table("40_numeric_label.csv")

    def test_every_outcome_is_the_manifests(self):
        """Accepted files are read, refused ones end in a sentence."""
        entries = json.loads((ODD / "manifest.json").read_text(encoding="utf-8"))
        assert {entry["file"] for entry in entries} == {path.name for path in ODD.glob("*.csv")}
        for entry in entries:
            try:
                sheet = odd_sheet(entry["file"])
                make_table(sheet, Roles(sheet.header[-1]))
            except TableError:
                outcome = "refuse"
            else:
                outcome = "accept"
            assert entry["outcome"].startswith(outcome), entry["file"]


class TestReading:
    @pytest.mark.parametrize("data", [b"", b"  \n\n \r\n", b"\xef\xbb\xbf\n"])
    def test_empty(self, data):
        message = "‘e.csv’ is empty; a header line and one line a case are needed."
        with pytest.raises(TableError, match=exactly(message)):
            read_sheet(data, "e.csv")

    def test_one_column(self):
        message = (
            "‘made.csv’ has one column (‘class’); at least a label and one feature are needed, "
            "separated by comma, semicolon or tab."
        )
        with pytest.raises(TableError, match=exactly(message)):
            sheet_of("class\na\nb\n")

    def test_many_rows_of_other_widths(self):
        rows = ["x,class", *(["1,a,b"] * 1007)]
        message = (
            "Rows of ‘made.csv’ differ in width: the header has 2 values, line 2 has 3, line 3 has "
            "3, line 4 has 3, line 5 has 3, line 6 has 3 and 1,002 more. Nothing was read."
        )
        with pytest.raises(TableError, match=exactly(message)):
            sheet_of("\n".join(rows))

    def test_an_entry_that_never_ends(self):
        text = 'x,class\n1,a\n2,"' + "long " * 210_000 + "\n"
        message = "Line 3 cannot be read: field larger than field limit (1000000)."
        with pytest.raises(TableError, match=exactly(message)):
            sheet_of(text)

    def test_a_quote_that_is_never_closed_does_not_swallow_rows(self):
        with pytest.raises(TableError, match="cannot be read"):
            sheet_of('x,class\n1,"a\n2,b\n3,a\n')

    @pytest.mark.parametrize(
        ("text", "decimal", "rows"),
        [
            ("x,class\n0.5,a\n1.25,b\n", ".", (("0.5", "a"), ("1.25", "b"))),
            ("x;class\n0.5;a\n1.25;b\n", ".", (("0.5", "a"), ("1.25", "b"))),
            ("x;class\n0,5;a\n1,25;b\n", ",", (("0,5", "a"), ("1,25", "b"))),
            ("x\tclass\n0,5\ta\n1,25\tb\n", ",", (("0,5", "a"), ("1,25", "b"))),
            ("x,class\r\n0.5,a\r\n\r\n1.25,b\r\n", ".", (("0.5", "a"), ("1.25", "b"))),
            ("x,class\n 0.5 , a\n1.25,b \n", ".", (("0.5", "a"), ("1.25", "b"))),
        ],
    )
    def test_delimiters_and_decimals(self, text, decimal, rows):
        sheet = sheet_of(text)
        assert sheet.header == ("x", "class")
        assert (sheet.decimal, sheet.rows) == (decimal, rows)

    def test_unnamed_columns(self):
        sheet = sheet_of("x,,class\n1,2,a\n3,4,b\n")
        assert sheet.header == ("x", "column 2", "class")
        assert sheet.notices == ("Column 2 has no name; it is called ‘column 2’.",)

    def test_lines_count_blank_ones(self):
        assert sheet_of("x,class\n1,a\n\n\n2,b\n").lines == (2, 5)

    def test_unknown_column(self):
        message = "There is no column ‘y’ in ‘made.csv’; it has ‘x’ and ‘class’."
        with pytest.raises(TableError, match=exactly(message)):
            sheet_of("x,class\n1,a\n").column("y")


TEN = "\n".join(f"{i % 7}.5,{'ab'[i % 2]}" for i in range(10))


class TestRoles:
    text = f"x,class\n{TEN}\n"

    def test_no_label(self):
        message = "Choose the column that holds the class of each case."
        with pytest.raises(TableError, match=exactly(message)):
            table_of(self.text, "")

    @pytest.mark.parametrize(
        "roles", [Roles("y"), Roles("class", unit="y"), Roles("class", leave_out=("y",))]
    )
    def test_unknown_columns(self, roles):
        message = "There is no column ‘y’ in ‘made.csv’; it has ‘x’ and ‘class’."
        with pytest.raises(TableError, match=exactly(message)):
            make_table(sheet_of(self.text), roles)

    def test_label_and_unit_alike(self):
        message = "‘class’ cannot be both the label and the unit."
        with pytest.raises(TableError, match=exactly(message)):
            table_of(self.text, unit="class")

    def test_nothing_to_learn_from(self):
        message = (
            "No column is left for the candidates to learn from; keep at least one besides the "
            "label ‘class’."
        )
        with pytest.raises(TableError, match=exactly(message)):
            table_of(self.text, leave_out=("x",))

    def test_no_labels_at_all(self):
        message = "The column ‘class’ holds no class; at least two are needed."
        with pytest.raises(TableError, match=exactly(message)):
            table_of("x,class\n1,\n2,NA\n")

    def test_left_out_columns_are_not_seen(self):
        table = table_of("x,y,class\n1,5,a\n2,6,b\n3,5,a\n", leave_out=("y",))
        assert [c.name for c in table.columns] == ["x"]
        assert table.left_out == ("y",)

    def test_labels_are_taken_as_written(self):
        table = table_of("x,class\n1,null\n2,None\n3,007\n4,7\n")
        assert table.classes == ("007", "7", "None", "null")
        assert table.labels.tolist() == [3, 2, 0, 1]

    def test_numbers_may_be_classes_where_they_come_back(self):
        # 21 different numbers in 84 rows
        rows = "\n".join(f"{i * 0.3},{i % 21}" for i in range(84))
        assert table_of(f"x,class\n{rows}\n").n_classes == 21

    def test_units(self):
        table = table_of(
            "lot,x,class\nB,1,a\nA,2,b\nB,3,a\n,4,b\nA,9,b\n", unit="lot", noun=Noun("lot", "lots")
        )
        assert table.unit_names == ("B", "A")
        assert table.units.tolist() == [0, 1, 0, 1]
        assert table.set_aside == (SetAside("no lot named", 1),)
        assert (table.n_units, table.has_units) == (2, True)

    def test_rows_are_units_where_none_are_named(self):
        table = table_of("x,class\n1,a\n\n2,b\n")
        assert table.unit_names == ("row on line 2", "row on line 4")
        assert not table.has_units

    def test_many_unlabelled_rows_are_not_all_listed(self):
        rows = "\n".join(f"{i}.2,{'ab'[i % 2] if i > 6 else ''}" for i in range(20))
        (aside,) = table_of(f"x,class\n{rows}\n").set_aside
        assert aside == SetAside("no label (lines 2, 3, 4, 5, 6, …)", 7)

    def test_one_unlabelled_row(self):
        (aside,) = table_of("x,class\n1,a\n2,\n3,b\n").set_aside
        assert aside == SetAside("no label (line 3)", 1)


class TestColumns:
    @pytest.mark.parametrize(
        ("entries", "reason"),
        [
            (["", "NA", "n/a"] * 4, "it has no values"),
            (["3.5", "3.50", ""] * 4, "it has the same value everywhere"),
            (
                [f"name {i}" for i in range(12)],
                "it has a different text in every row, like an identifier or a remark",
            ),
            ([str(500 + i) for i in range(12)], "it numbers the rows"),
        ],
    )
    def test_left_out(self, entries, reason):
        rows = "\n".join(f"{e},{i * i}.5,{'ab'[i % 2]}" for i, e in enumerate(entries))
        table = table_of(f"z,x,class\n{rows}\n")
        assert table.left_out == ("z",)
        assert table.notices == (f"Left out ‘z’: {reason}.",)

    def test_row_numbers_are_known_beside_rows_set_aside(self):
        rows = "\n".join(f"{i},{i * i}.5,{'ab'[i % 2] if i != 4 else ''}" for i in range(12))
        assert table_of(f"z,x,class\n{rows}\n").left_out == ("z",)

    def test_readings_all_different_are_kept(self):
        rows = "\n".join(f"{i * i}.5,{'ab'[i % 2]}" for i in range(12))
        assert table_of(f"x,class\n{rows}\n").left_out == ()

    def test_text(self):
        table = table_of("site,class\nnorth,a\nsouth,b\n,a\nnorth,b\n")
        (site,) = table.columns
        assert (site.kind, site.categories, site.missing) == ("text", ("north", "south"), 1)
        np.testing.assert_array_equal(site.values, [0, 1, np.nan, 0])

    @pytest.mark.parametrize(
        ("entry", "value"), [("1e3", 1000), (".5", 0.5), ("+2.", 2), ("-7", -7), ("1E-2", 0.01)]
    )
    def test_numbers(self, entry, value):
        table = table_of(f"x,class\n{entry},a\n3,b\n4,a\n")
        assert table.columns[0].values.tolist() == [value, 3, 4]

    def test_half_words_is_still_a_column_of_numbers(self):
        table = table_of("x,class\n1,a\n2,b\nlow,a\nhigh,b\n")
        assert table.columns[0].kind == "number"
        assert table.notices == (
            "‘x’ is read as numbers; 2 other entries (‘high’ and ‘low’) count as missing.",
        )
        mostly_words = table_of("x,class\n1,a\nmid,b\nlow,a\nhigh,b\n")
        assert mostly_words.columns[0].kind == "text"


def test_columns_are_taken_from_the_sheet_once_not_once_a_row(monkeypatch):
    taken = []
    column = Sheet.column

    def counted(self, *which):
        taken[-1] += 1
        return column(self, *which)

    monkeypatch.setattr(Sheet, "column", counted)
    for n in (30, 90):
        taken.append(0)
        rows = "\n".join(f"{i * 3}.5,{i // 2},{'ab'[i // 2 % 2]}" for i in range(n))
        table_of(f"x,lot,class\n{rows}\n", unit="lot", copies="set_aside")
    assert taken[0] == taken[1]


class TestCopies:
    text = (
        "lot,x,y,class\n"
        "A,1,5,a\nA,2,6,a\n"
        "B,1,7,b\nB,3,8,b\nB,1,7,b\n"  # its first row entered twice
        "C,2,6,a\nC,1,5,a\n"  # lot A again, in another order
        "D,1,5,b\nD,2,6,b\n"  # the readings of A under another class
        "E,1,5,a\n"  # a part of A only
    )

    def test_found(self):
        sheet = sheet_of(self.text)
        assert copies(sheet, Roles("class", unit="lot")) == ({4}, {"C"})
        assert copies(sheet, Roles("class")) == ({4}, set())

    def test_a_row_entered_twice_does_not_hide_a_copy(self):
        text = "lot,x,class\nA,1,a\nA,1,a\nA,3,a\nB,1,a\nB,3,a\nC,5,b\n"
        assert copies(sheet_of(text), Roles("class", unit="lot")) == ({1}, {"B"})

    def test_columns_left_out_do_not_tell_units_apart(self):
        sheet = sheet_of("lot,day,x,class\nA,1,5,a\nB,2,5,a\nC,3,5,b\n")
        assert copies(sheet, Roles("class", unit="lot")) == (set(), set())
        roles = Roles("class", unit="lot", leave_out=("day",))
        assert copies(sheet, roles) == (set(), {"B"})

    def test_set_aside(self):
        roles = {"unit": "lot", "noun": Noun("lot", "lots")}
        table = table_of(self.text, copies="set_aside", **roles)
        assert table.set_aside == (
            SetAside("entered twice", 1),
            SetAside("lots submitted twice", 2, 1),
        )
        assert table.unit_names == ("A", "B", "D", "E")
        assert table.lines.tolist() == [2, 3, 4, 5, 9, 10, 11]

    def test_kept_unless_asked(self):
        assert table_of(self.text, unit="lot").n_cases == 10


class TestNoun:
    @pytest.mark.parametrize(
        ("column", "singular", "plural"),
        [
            ("lot", "lot", "lots"),
            ("Lot No", "lot", "lots"),
            ("patient_id", "patient", "patients"),
            ("Sample number", "sample", "samples"),
            ("study_site", "study site", "study sites"),
            ("assay", "assay", "assays"),
            ("biopsy", "biopsy", "biopsies"),
            ("id", "id", "ids"),
            ("batch", "batch", "batches"),
            ("box_nr", "box", "boxes"),
        ],
    )
    def test_from_a_column(self, column, singular, plural):
        assert noun_from(column) == Noun(singular, plural)

    @pytest.mark.parametrize("column", ["volcano", "barcode", "hybrid", "piano"])
    def test_endings_that_belong_to_the_word_stay(self, column):
        assert noun_from(column) == Noun(column, column + "s")

    def test_without_a_column(self):
        assert noun_from("") == CASE
