"""Zip files written member by member, equal content giving equal files."""

import zipfile
from io import BytesIO
from pathlib import Path

from ledgersolve.workbook.container import open_container
from ledgersolve.workbook.packing import QUICK_ABOVE, Packer
from tests.packages import Entry, zip_bytes


def packed(contents: dict[str, bytes]) -> bytes:
    """A zip file of new members."""
    file = BytesIO()
    packer = Packer(file)
    for name, content in contents.items():
        packer.add(name, content)
    packer.close()
    return file.getvalue()


def test_new_members_are_read_by_others() -> None:
    """The standard library reads names, contents and checksums, small and large, plain and accented."""
    contents = {"a.xml": b"", "xl/größe.xml": b"x" * 1000, "big.bin": bytes(range(256)) * (QUICK_ABOVE // 200)}
    with zipfile.ZipFile(BytesIO(packed(contents))) as package:
        assert package.testzip() is None
        assert {name: package.read(name) for name in package.namelist()} == contents


def test_equal_contents_give_equal_files() -> None:
    """No time of writing goes into the file."""
    assert packed({"a.xml": b"abc"}) == packed({"a.xml": b"abc"})


def test_copies_keep_bytes_and_lose_what_was_odd(tmp_path: Path) -> None:
    """A copied member keeps its packed bytes; wide sizes and data descriptors are written plainly."""
    path = tmp_path / "a.zip"
    path.write_bytes(zip_bytes([Entry(b"a.xml", b"abc" * 99, flags=8), Entry(b"b.bin", b"xyz", method=0)], zip64=True,
                               gap=b"x" * 16))
    file = BytesIO()
    with open_container(path) as container:
        packer = Packer(file)
        for member in container.members:
            packer.copy(container, member)
        packer.close()
    (tmp_path / "b.zip").write_bytes(file.getvalue())
    with zipfile.ZipFile(file) as package:
        assert {name: package.read(name) for name in package.namelist()} == {"a.xml": b"abc" * 99, "b.bin": b"xyz"}
    with open_container(tmp_path / "b.zip") as container:
        assert [member.flags for member in container.members] == [0, 0]
