"""Results appear whole or not at all, and nothing is overwritten unasked."""

import errno
import hashlib
import json
import os
import shutil
from contextlib import AbstractContextManager
from pathlib import Path

import pytest

from hmmseg.errors import OutputError
from hmmseg.outputs import check_target, sha256_of, whole_file, whole_folder, write_json


def names(folder: Path) -> list[str]:
    """Return every file and folder under `folder`, hidden ones too."""
    return sorted(str(path.relative_to(folder)) for path in folder.rglob("*"))


def make_result(folder: Path, content: str = "old") -> Path:
    folder.mkdir()
    (folder / "provenance.json").write_text("{}")
    (folder / "regions.bed").write_text(content)
    return folder


def half_write(
    result: AbstractContextManager[Path], name: str, failure: type[BaseException]
) -> None:
    """Write a part of a result, then fail."""
    with result as temporary:
        (temporary / name if name else temporary).write_text("half")
        raise failure


class TestWholeFile:
    def test_appears_under_its_name_with_nothing_beside_it(self, tmp_path: Path) -> None:
        with whole_file(tmp_path / "model.json") as temporary:
            assert temporary.parent == tmp_path
            assert temporary.suffix == ".json"
            assert not (tmp_path / "model.json").exists()
            temporary.write_text("new")
        assert names(tmp_path) == ["model.json"]
        assert (tmp_path / "model.json").read_text() == "new"

    @pytest.mark.parametrize("failure", [ValueError, KeyboardInterrupt, SystemExit])
    def test_a_failure_leaves_the_old_file(
        self, tmp_path: Path, failure: type[BaseException]
    ) -> None:
        target = tmp_path / "model.json"
        target.write_text("old")
        with pytest.raises(failure):
            half_write(whole_file(target, force=True), "", failure)
        assert names(tmp_path) == ["model.json"]
        assert target.read_text() == "old"

    def test_an_existing_file_needs_force(self, tmp_path: Path) -> None:
        target = tmp_path / "model.json"
        target.write_text("old")
        with pytest.raises(OutputError, match=r"model\.json exists; give --force"):
            whole_file(target).__enter__()
        with whole_file(target, force=True) as temporary:
            temporary.write_text("new")
        assert target.read_text() == "new"

    def test_a_file_that_appears_meanwhile_is_kept(self, tmp_path: Path) -> None:
        target = tmp_path / "model.json"
        with pytest.raises(OutputError, match="exists"), whole_file(target):
            target.write_text("somebody else's")
        assert target.read_text() == "somebody else's"
        assert names(tmp_path) == ["model.json"]

    def test_makes_parents_and_takes_them_back_on_failure(self, tmp_path: Path) -> None:
        with pytest.raises(ValueError, match="stop"), whole_file(tmp_path / "a/b/c.json"):
            raise ValueError("stop")
        assert names(tmp_path) == []
        with whole_file(tmp_path / "a/b/c.json") as temporary:
            temporary.write_text("new")
        assert names(tmp_path) == ["a", "a/b", "a/b/c.json"]

    def test_takes_the_permissions_of_an_ordinary_file(self, tmp_path: Path) -> None:
        (tmp_path / "ordinary").touch()
        with whole_file(tmp_path / "result"):
            pass
        assert (tmp_path / "result").stat().st_mode == (tmp_path / "ordinary").stat().st_mode

    def test_follows_a_symbolic_link(self, tmp_path: Path) -> None:
        (tmp_path / "elsewhere").mkdir()
        link = tmp_path / "model.json"
        link.symlink_to(tmp_path / "elsewhere" / "model.json")
        with whole_file(link) as temporary:
            temporary.write_text("new")
        assert link.is_symlink()
        assert (tmp_path / "elsewhere" / "model.json").read_text() == "new"

    def test_never_replaces_a_folder_or_a_device(self, tmp_path: Path) -> None:
        os.mkfifo(tmp_path / "pipe")
        with pytest.raises(OutputError, match="not a regular file"):
            whole_file(tmp_path / "pipe", force=True).__enter__()
        (tmp_path / "folder").mkdir()
        with pytest.raises(OutputError, match="is a folder"):
            whole_file(tmp_path / "folder", force=True).__enter__()

    def test_a_full_disk_is_explained(self, tmp_path: Path) -> None:
        with pytest.raises(OutputError, match=r"No space left on device; make room"):  # noqa: SIM117
            with whole_file(tmp_path / "model.json"):
                raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        assert names(tmp_path) == []

    def test_an_input_that_cannot_be_read_is_not_blamed_on_the_output(self, tmp_path: Path) -> None:
        with pytest.raises(FileNotFoundError), whole_file(tmp_path / "out" / "model.json"):
            (tmp_path / "no.fa").read_bytes()
        assert names(tmp_path) == []


class TestWholeFolder:
    def test_appears_under_its_name_with_nothing_beside_it(self, tmp_path: Path) -> None:
        with whole_folder(tmp_path / "a" / "result") as temporary:
            assert temporary.parent == tmp_path / "a"
            assert temporary.name.startswith(".")
            (temporary / "sub").mkdir()
            (temporary / "sub" / "regions.bed").write_text("new")
            assert not (tmp_path / "a" / "result").exists()
        assert names(tmp_path) == ["a", "a/result", "a/result/sub", "a/result/sub/regions.bed"]

    @pytest.mark.parametrize("failure", [ValueError, KeyboardInterrupt, SystemExit])
    def test_a_failure_leaves_the_old_folder(
        self, tmp_path: Path, failure: type[BaseException]
    ) -> None:
        target = make_result(tmp_path / "result")
        before = names(tmp_path)
        with pytest.raises(failure):
            half_write(whole_folder(target, force=True), "regions.bed", failure)
        assert names(tmp_path) == before
        assert (target / "regions.bed").read_text() == "old"

    def test_force_replaces_an_earlier_result_whole(self, tmp_path: Path) -> None:
        target = make_result(tmp_path / "result")
        with pytest.raises(OutputError, match="exists; give --force"):
            whole_folder(target).__enter__()
        with whole_folder(target, force=True) as temporary:
            (temporary / "other.bed").write_text("new")
            assert (target / "regions.bed").read_text() == "old"
        assert names(tmp_path) == ["result", "result/other.bed"]

    def test_force_spares_a_folder_that_is_no_result(self, tmp_path: Path) -> None:
        (tmp_path / "home").mkdir()
        (tmp_path / "home" / "thesis.tex").write_text("precious")
        with pytest.raises(OutputError, match=r"holds no provenance\.json"):
            whole_folder(tmp_path / "home", force=True).__enter__()
        assert names(tmp_path) == ["home", "home/thesis.tex"]

    def test_fills_an_empty_folder(self, tmp_path: Path) -> None:
        (tmp_path / "result").mkdir()
        with whole_folder(tmp_path / "result") as temporary:
            (temporary / "x").touch()
        assert names(tmp_path) == ["result", "result/x"]

    def test_does_not_replace_a_file(self, tmp_path: Path) -> None:
        (tmp_path / "result").write_text("old")
        with pytest.raises(OutputError, match="is a file"):
            whole_folder(tmp_path / "result", force=True).__enter__()

    def test_puts_the_old_folder_back_if_the_new_one_cannot_take_its_place(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        target = make_result(tmp_path / "result")
        before = names(tmp_path)
        rename = Path.rename

        def refuse(self: Path, to: Path) -> Path:
            if "partial" in self.name:
                raise PermissionError(errno.EPERM, "Operation not permitted", str(self))
            return rename(self, to)

        monkeypatch.setattr(Path, "rename", refuse)
        with pytest.raises(OutputError, match="Operation not permitted"):  # noqa: SIM117
            with whole_folder(target, force=True) as temporary:
                (temporary / "regions.bed").write_text("new")
        assert names(tmp_path) == before
        assert (target / "regions.bed").read_text() == "old"

    def test_every_file_is_flushed_before_the_name_is_given(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        events: list[str] = []
        fsync, rename = os.fsync, Path.rename

        def record_fsync(descriptor: int) -> None:
            events.append(Path(os.readlink(f"/proc/self/fd/{descriptor}")).name)
            fsync(descriptor)

        def record_rename(self: Path, to: Path) -> Path:
            events.append("rename")
            return rename(self, to)

        monkeypatch.setattr(os, "fsync", record_fsync)
        monkeypatch.setattr(Path, "rename", record_rename)
        with whole_folder(tmp_path / "result") as temporary:
            (temporary / "sub").mkdir()
            (temporary / "sub" / "deep").write_text("x")
            (temporary / "top").write_text("x")
        at = events.index("rename")
        assert set(events[:at]) == {"deep", "top", "sub", temporary.name}
        assert events[at + 1 :] == [tmp_path.name]


class TestCheckTarget:
    def test_a_parent_that_is_a_file(self, tmp_path: Path) -> None:
        (tmp_path / "file").touch()
        for make in (whole_file, whole_folder):
            with pytest.raises(OutputError, match="is a file, not a folder"):
                make(tmp_path / "file" / "sub" / "out").__enter__()

    def test_a_parent_without_permission(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        monkeypatch.setattr(os, "access", lambda path, mode: Path(path) != tmp_path)
        with pytest.raises(OutputError, match=f"no permission to write in {tmp_path}"):
            check_target(tmp_path / "a" / "b", force=False)

    def test_a_refusal_that_only_the_attempt_shows(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        def refuse(self: Path, *_: object, **__: object) -> None:
            raise OSError(errno.EROFS, os.strerror(errno.EROFS), str(self))

        monkeypatch.setattr(Path, "mkdir", refuse)
        with pytest.raises(OutputError, match=r"^cannot write .*Read-only file system; choose"):
            whole_folder(tmp_path / "out").__enter__()

    def test_touches_nothing(self, tmp_path: Path) -> None:
        check_target(tmp_path / "a" / "b", force=False)
        assert names(tmp_path) == []

    @pytest.mark.parametrize("force", [False, True])
    def test_messages_are_one_line(self, tmp_path: Path, force: bool) -> None:
        (tmp_path / "full").mkdir()
        (tmp_path / "full" / "x").touch()
        with pytest.raises(OutputError) as caught:
            check_target(tmp_path / "full", force)
        assert "\n" not in str(caught.value)


def test_sha256_of_a_file(tmp_path: Path) -> None:
    # FIPS 180-4 examples, published by NIST: the message "abc".
    (tmp_path / "abc").write_bytes(b"abc")
    assert sha256_of(tmp_path / "abc") == (
        "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    )
    long = bytes(range(256)) * 5000
    (tmp_path / "long").write_bytes(long)
    assert sha256_of(tmp_path / "long") == hashlib.sha256(long).hexdigest()


def test_json_keeps_order_and_refuses_nan(tmp_path: Path) -> None:
    write_json(tmp_path / "x.json", {"b": [1, 0.1], "a": "é"})
    assert (tmp_path / "x.json").read_bytes() == (
        '{\n  "b": [\n    1,\n    0.1\n  ],\n  "a": "é"\n}\n'.encode()
    )
    assert json.loads((tmp_path / "x.json").read_text(encoding="utf-8")) == {
        "b": [1, 0.1],
        "a": "é",
    }
    with pytest.raises(ValueError, match="not JSON compliant"):
        write_json(tmp_path / "y.json", {"a": float("nan")})
    assert not (tmp_path / "y.json").exists()


def test_the_old_result_is_removed_last(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    target = make_result(tmp_path / "result")
    seen: list[str] = []
    remove = shutil.rmtree

    def record(path: Path, ignore_errors: bool = False) -> None:
        seen.append((target / "regions.bed").read_text())
        remove(path, ignore_errors)

    monkeypatch.setattr(shutil, "rmtree", record)
    with whole_folder(target, force=True) as temporary:
        (temporary / "regions.bed").write_text("new")
    assert seen == ["new"]
