"""Spreadsheets: sheets, devices, and what they must not do to the workbench."""

import base64
import io
import struct
import zipfile
import zlib

import numpy as np
import openpyxl
import pytest

from core.errors import UnreadableFile
from core.reading import read_sweeps

VOLTAGE = np.linspace(-0.1, 1.2, 27)
CURRENT = 22 - 1e-9 * np.exp(VOLTAGE / 0.045)  # [mA]
ROWS = [["Voltage (V)", "Current (mA)"], *([float(v), float(c)] for v, c in zip(VOLTAGE, CURRENT, strict=True))]


def workbook(sheets):
    book = openpyxl.Workbook()
    book.remove(book.active)
    for name, rows in sheets.items():
        sheet = book.create_sheet(name)
        for row in rows:
            sheet.append(row)
    stream = io.BytesIO()
    book.save(stream)
    return stream.getvalue()


def changed(data, old, new):
    """The same workbook with other bytes in its first sheet."""
    stream = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(data)) as source, zipfile.ZipFile(stream, "w", zipfile.ZIP_DEFLATED) as target:
        for name in source.namelist():
            content = source.read(name)
            if name == "xl/worksheets/sheet1.xml":
                assert old in content
                content = content.replace(old, new)
            target.writestr(name, content)
    return stream.getvalue()


def test_every_sheet_with_a_sweep_is_read_and_the_others_are_noted():
    dark = [ROWS[0], *([v, c - 22] for v, c in ROWS[1:])]
    head = [["Area", "0.09 cm2"], ["Temperature (°C)", 30], []]
    data = workbook({"Sheet1": ROWS, "K12": head + ROWS, "remarks": [["nothing here"]], "dark": dark})
    sweeps = read_sweeps(data, "lot7.xlsx")
    assert [s.name for s in sweeps] == ["lot7 forward", "K12 forward", "lot7 dark"]
    assert sweeps[0].current[2] == pytest.approx(0.022)
    assert sweeps[1].area == pytest.approx(0.09) and sweeps[1].temperature == pytest.approx(303.15)
    assert all(any("“remarks”" in note for note in s.notes) for s in sweeps)


def test_pixels_as_sheets_keep_the_files_name():
    assert [s.device for s in read_sweeps(workbook({"px1": ROWS, "px2": ROWS}), "K12.xlsx")] == ["K12 px1", "K12 px2"]


def test_numbers_kept_as_text_are_numbers():
    rows = [ROWS[0], *([f"{v:.4f}".replace(".", ","), f"{c:.5f}".replace(".", ",")] for v, c in ROWS[1:])]
    [sweep] = read_sweeps(workbook({"K12": rows}), "a.xlsx")
    assert sweep.current == pytest.approx(1e-3 * CURRENT, abs=1e-8)


def test_opendocument():
    def cell(value):
        kind = "string" if isinstance(value, str) else "float"
        number = "" if kind == "string" else f' office:value="{value}"'
        return f'<table:table-cell office:value-type="{kind}"{number}><text:p>{value}</text:p></table:table-cell>'

    spaces = "".join(
        f' xmlns:{short}="urn:oasis:names:tc:opendocument:xmlns:{name}:1.0"'
        for short, name in (("office", "office"), ("table", "table"), ("text", "text"))
    )
    rows = "".join(f"<table:table-row>{''.join(map(cell, row))}</table:table-row>" for row in ROWS)
    empty = (
        '<table:table-row table:number-rows-repeated="1048540">'
        '<table:table-cell table:number-columns-repeated="16384"/></table:table-row>'
    )
    manifest = '<manifest:manifest xmlns:manifest="urn:oasis:names:tc:opendocument:xmlns:manifest:1.0"/>'
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("mimetype", "application/vnd.oasis.opendocument.spreadsheet")
        archive.writestr("META-INF/manifest.xml", '<?xml version="1.0"?>' + manifest)
        archive.writestr(
            "content.xml",
            f'<?xml version="1.0"?><office:document-content{spaces}><office:body><office:spreadsheet>'
            f'<table:table table:name="K5">{rows}{empty}</table:table>'
            "</office:spreadsheet></office:body></office:document-content>",
        )
    [sweep] = read_sweeps(stream.getvalue(), "a.ods")
    assert sweep.device == "K5"
    assert sweep.current == pytest.approx(1e-3 * CURRENT)


def test_old_binary_workbook():
    [sweep] = read_sweeps(zlib.decompress(base64.b85decode(OLD_WORKBOOK)), "a.xls")
    assert sweep.device == "K9"
    assert sweep.current == pytest.approx(1e-3 * CURRENT, abs=1e-9)


@pytest.mark.parametrize(
    ("old", "new"),
    [(b'r="B2"', b'r="XFD1048576"'), (b'r="B2"', b"r='XFD1048576'"), (b'r="A2"', b'r="ZZZZZZ2"'), (b'r="A2"', b'r="A99999999999"')],
)  # fmt: skip
def test_a_cell_far_away_does_not_take_the_workbench_down(old, new):
    with pytest.raises(UnreadableFile, match="spreadsheet"):
        read_sweeps(changed(workbook({"S": ROWS}), old, new), "far.xlsx")


def test_too_many_cells_in_between():
    with pytest.raises(UnreadableFile, match="more than 2,000,000 cells"):
        read_sweeps(changed(workbook({"S": ROWS}), b'r="B2"', b'r="DZ50000"'), "wide.xlsx")


def test_a_small_file_that_unpacks_to_a_huge_one_is_not_unpacked():
    data = workbook({"S": ROWS})
    # The size after unpacking stands 22 bytes before the name in the directory at the end of a zip.
    place = data.rindex(b"xl/worksheets/sheet1.xml") - 22
    with pytest.raises(UnreadableFile, match="unpacked"):
        read_sweeps(data[:place] + struct.pack("<I", 200_000_000) + data[place + 4 :], "bomb.xlsx")


def test_no_sheet_with_numbers():
    with pytest.raises(UnreadableFile, match="no sheet has a table of numbers"):
        read_sweeps(workbook({"a": [["words"]], "b": []}), "words.xlsx")


def test_a_sheet_that_cannot_be_used_is_named_with_its_row():
    with pytest.raises(UnreadableFile, match="sheet “K12”, row 3: the current is zero"):
        read_sweeps(workbook({"K12": [[], ["V (V)", "I (A)"], [0.1, 0], [0.2, 0], [0.3, 0]]}), "zero.xlsx")


def test_damaged_and_protected_workbooks():
    data = workbook({"S": ROWS})
    with pytest.raises(UnreadableFile, match="damaged"):
        read_sweeps(data[: len(data) // 2], "half.xlsx")
    with pytest.raises(UnreadableFile, match="password"):
        read_sweeps(b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(600) + "EncryptedPackage".encode("utf-16-le"), "locked.xlsx")
    with pytest.raises(UnreadableFile, match="damaged"):
        read_sweeps(b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(600), "old.xls")


# The rows above as a workbook of the old binary kind, packed.
OLD_WORKBOOK = (
    "c-rllZEO@p7{{O8d%te4d+lA@y9&8f!4~?3fJ8sQf&?04Ak_~Qh^7=ciD_xgSxhuq(Rx)#te_FJ)I@~DR3mCaYz-317b3~Uf`k;`=$o%0Vyu{$9NancpV{-M"
    "^Px?YsJZ7d&(8g4e)~K(Gds7tXNH4g2S138(==O74$5SG<j&JHR($pslURE;%d7U$%SyIj|0(l%*+jZsbgVe#;d996dz^H7-+7XGq6t>+r-x}>ds{qq1MN=a"
    "(5&$smNBnUA5#JpK~|;kTj0y!-$T!j;a5O;0e%_lJEm=<VQbxj+vO@=uUDfjK>WM|V7`E|h{E&<U&T-D(L`SttxP=B-1_fqnCmp?FtK^7kGI7W&8=e;ViS0n"
    "e#^#)uGm-VP^_TeSY0Eg|9-vhQRpx0PNJQZ-Gl|6BtM;U@D`o!zT+y*!;<8sh^Vo>wWE1kJXX_KYY?s4kx0bbI$|~3SJwLZu8gbLyzVM4#_Beh-%2H@2XQi!"
    "?bBELfB9_f<_4<?%1-RuVt=2<Q=%+A%?Snv&~g)zOl1N5LilHJ)+*Ga@FBJ`*>QeDSXS0_q0h5uozLPdhMlu+&8ye2dh*gegL9LURxPU^sULqlbY#RjNY(8B"
    "W-H_Qr;F;eI<5CLZXa3pQImVY*YJ_Q><eDql(}c+pI8Z9BR{G^c=3&ojwbtS)B1PnerQ4ZlI@rdHYOVSfBrn*L2p~Z8C}8XV1Aa2m;qy7CdW7wi~|fOIpYBH"
    "<k57FaZY1+FDIBjj7YyF6wal8oyu`8MJyM%g)){4%#ROT$T4mO;|60%#tr8C-sf_RN0FZg%mL(g+7b%qPOW|^V{=|bEHAiiGL{$2o6i2U&G;0td|;Nyl_eC;"
    "^;DmovN^vZmLJ@UGL|3AfO%!aW{MO{5tu`gDFU;mX+yWo7>fK1FrTKlePs!SbH|MxJsHUrE4X5C*#2qE5(?+u=-d8!T5<tJjsb9^GRFXz6T5zTcS<rPidZFi"
    "V>oFEg>$E0nX_v|a;74d3C^R5SSFZ>vrmMQk_jqe1;rdc$n85zD4a_zy}5UHMsTGHt~75vez1hXxx1<l4eU(|u1t|*8Msw4$1*T==Q=m;o)Sz*5i6889+xbk"
    "aIW4sZ_F7HTv!n+46a4S3WFK!8C;s`5=^-wR(aldT(*S5xyE<&%SXGHfU8i%ssQJf^IQR@bAQd2iR2<Ml?tX3%v&<QN-!7B4}5bb6$2AdFcC1vBohI%ugTSY"
    "OT*$J&O{YV6wI(>qF~m)deJ#Lx&cg;f~f*CDVZuT@%<OSefyC|hnDN5^da9O*`3~>=BI)ctY8Hz*vw6n_x1d~lix?W<kN#kzSp_NN~Z9d<bP}TQak%}um{uC"
    ")W(hpdTdtfr<`1xeJ*W=jQzfl+kGs0f?8-Z@@Sd$`ejdlTK?~uF=+mMm(XnEXJ(V<KOFxLa3Gs^"
)
