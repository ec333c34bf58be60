import pytest

from rayloom.errors import FileAccessError
from rayloom.writing import replacing, write_text


def names(folder):
    return sorted(path.name for path in folder.iterdir())


def test_final_name_appears_only_when_all_is_written(tmp_path):
    final = tmp_path / "new" / "model.vts"
    with replacing(final) as temporary:
        temporary.write_text("whole")
        assert not final.exists()
        assert temporary.parent == final.parent
        assert temporary.suffix == ".vts"
    assert final.read_text() == "whole"
    assert names(final.parent) == ["model.vts"]


def test_failure_keeps_the_old_file_and_leaves_no_rest(tmp_path):
    final = tmp_path / "table.csv"
    final.write_text("old")

    def fail_half_way():
        with replacing(final) as temporary:
            temporary.write_text("half")
            raise RuntimeError("half way")

    with pytest.raises(RuntimeError, match="half way"):
        fail_half_way()
    assert final.read_text() == "old"
    assert names(tmp_path) == ["table.csv"]


def test_success_replaces_the_old_file(tmp_path):
    final = tmp_path / "table.csv"
    final.write_text("old")
    write_text(final, "neu: ä′")
    assert final.read_bytes() == "neu: ä′".encode()


def test_impossible_folder_is_a_clear_error(tmp_path):
    (tmp_path / "file").write_text("not a folder")
    with pytest.raises(FileAccessError, match=r"table\.csv: cannot be written"):
        write_text(tmp_path / "file" / "table.csv", "text")


def test_name_taken_by_a_folder_is_a_clear_error(tmp_path):
    (tmp_path / "report.html").mkdir()
    with pytest.raises(FileAccessError, match=r"report\.html: cannot be written"):
        write_text(tmp_path / "report.html", "text")
    assert names(tmp_path) == ["report.html"]
