"""What is taken for a workbook and where it is looked for."""

import os
import sys

import pytest

from bridge.watch.scan import is_workbook_name, scan


@pytest.mark.parametrize("name", ["a.xlsx", "A.XLSX", "macro.xlsm", "smeta смета.xlsx", "a - fit.xlsx", "~half.xlsx"])
def test_workbooks(name):
    assert is_workbook_name(name)


@pytest.mark.parametrize(
    "name",
    [
        "~$a.xlsx", ".~lock.a.xlsx#", ".a.xlsx", "lu717258h3v.tmp", "Cedd4100", "a.xlsx.sb-12345678-AbCdEf", "a.tmp",
        "a.sb-12345678-AbCdEf.xlsx", ".~savefit-1234.new", "a.xls", "a.ods", "a.xlsb", "a.csv",
    ],
)  # fmt: skip
def test_no_workbooks(name):
    assert not is_workbook_name(name)


def found(root):
    return {os.path.relpath(real, root): os.path.relpath(book.path, root) for real, book in scan(root).books.items()}


def test_everything_below_but_hidden_folders(tmp_path):
    for folder in ("", "a", "a/b", ".hidden", "a/.git"):
        (tmp_path / folder).mkdir(exist_ok=True)
        (tmp_path / folder / "book.xlsx").touch()
    assert set(found(tmp_path)) == {"book.xlsx", "a/book.xlsx", "a/b/book.xlsx"}
    assert len(scan(tmp_path).folders) == 3


def test_links_to_workbooks_and_folders(tmp_path):
    root, far = tmp_path / "root", tmp_path / "far"
    root.mkdir()
    far.mkdir()
    (far / "one.xlsx").touch()
    (far / "two.xlsx").touch()
    (root / "link.xlsx").symlink_to(far / "two.xlsx")
    assert found(root) == {"../far/two.xlsx": "link.xlsx"}
    (root / "folder").symlink_to(far)
    assert set(found(root)) == {"../far/one.xlsx", "../far/two.xlsx"}


def test_links_in_a_circle_and_to_nowhere(tmp_path):
    (tmp_path / "a").mkdir()
    (tmp_path / "a" / "up").symlink_to(tmp_path)
    (tmp_path / "a" / "book.xlsx").touch()
    (tmp_path / "nowhere.xlsx").symlink_to(tmp_path / "none.xlsx")
    (tmp_path / "self.xlsx").symlink_to(tmp_path / "self.xlsx")
    (tmp_path / "folder.xlsx").mkdir()
    assert set(found(tmp_path)) == {"a/book.xlsx"}


def test_our_own_names_are_told_apart(tmp_path):
    (tmp_path / ".~savefit-12345678.journal").touch()
    made = scan(tmp_path)
    assert made.books == {}
    assert made.ours == {str(tmp_path): [".~savefit-12345678.journal"]}


def test_a_folder_that_is_away(tmp_path):
    with pytest.raises(FileNotFoundError):
        scan(tmp_path / "none")


@pytest.mark.skipif(sys.platform == "win32", reason="mode bits")
def test_a_folder_that_cannot_be_looked_into_does_not_stop_the_rest(tmp_path, monkeypatch):
    (tmp_path / "closed").mkdir()
    (tmp_path / "book.xlsx").touch()
    scandir = os.scandir

    def refuse(path):
        if str(path).endswith("closed"):
            raise PermissionError(13, "Permission denied", path)
        return scandir(path)

    monkeypatch.setattr(os, "scandir", refuse)
    made = scan(tmp_path)
    assert len(made.books) == 1
    assert made.unreadable == {str(tmp_path / "closed")}


def test_names_that_are_no_text(tmp_path):
    name = os.fsdecode(b"b\xff\xfe.xlsx")
    try:
        (tmp_path / name).touch()
    except OSError:
        pytest.skip("this file system takes only proper text")
    assert list(found(tmp_path)) == [name]
