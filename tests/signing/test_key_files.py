"""Private and public key files: made whole or not at all, for their owner alone, and hostile ones refused with a remedy."""

from __future__ import annotations

import os
import random
import signal
import stat
import subprocess
import sys
import time
from pathlib import Path

import pytest
from cryptography.hazmat.primitives.asymmetric import ec, ed25519, rsa
from cryptography.hazmat.primitives.serialization import (
    BestAvailableEncryption,
    Encoding,
    NoEncryption,
    PrivateFormat,
    PublicFormat,
    load_pem_private_key,
)

from fieldbook.errors import UsageError
from fieldbook.signing import ed25519 as ours
from fieldbook.signing import keyring, pkcs8
from fieldbook.signing.key_file import HEAD, new_key_file, read_key_file
from fieldbook.signing.public_key import from_toml, public_of, read_public, to_toml
from fieldbook.signing.signer import signer_without_asking

SECRET = bytes(range(32))


@pytest.fixture(autouse=True)
def own_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A configuration folder of this test's own."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    return tmp_path / "config" / "fieldbook"


@pytest.fixture
def cheap(monkeypatch: pytest.MonkeyPatch) -> None:
    """Few rounds, where the cost of a passphrase is not what is tested."""
    monkeypatch.setattr(pkcs8, "ROUNDS", 1000)


def test_a_key_file_is_a_pem_that_others_read(tmp_path: Path) -> None:
    made = new_key_file(tmp_path / "a.key", "R. Kell", None)
    loaded = load_pem_private_key(made.path.read_bytes(), None)
    assert isinstance(loaded, ed25519.Ed25519PrivateKey)
    assert loaded.private_bytes_raw() == made.secret()
    assert read_key_file(made.path) == made
    expected = loaded.private_bytes(Encoding.PEM, PrivateFormat.PKCS8, NoEncryption()).decode()
    assert made.block == expected


def test_an_encrypted_key_file_is_standard_and_costs_600_000_rounds(tmp_path: Path) -> None:
    made = new_key_file(tmp_path / "a.key", "R. Kell", "a stone’s throw")
    loaded = load_pem_private_key(made.path.read_bytes(), "a stone’s throw".encode())
    assert isinstance(loaded, ed25519.Ed25519PrivateKey)
    assert ours.public_of(loaded.private_bytes_raw()) == made.key.public
    assert pkcs8._integer(600_000) in pkcs8._der(made.block)
    assert made.secret("a stone’s throw") == loaded.private_bytes_raw()


@pytest.mark.usefixtures("cheap")
@pytest.mark.parametrize("passphrase", ["wrong", "", None, "a stone’s throw "])
def test_a_wrong_passphrase_is_said(tmp_path: Path, passphrase: str | None) -> None:
    made = new_key_file(tmp_path / "a.key", "R. Kell", "a stone’s throw")
    with pytest.raises(pkcs8.WrongPassphrase) as caught:
        made.secret(passphrase)
    assert caught.value.code == "passphrase"


@pytest.mark.usefixtures("cheap")
def test_a_passphrase_may_be_spelt_on_any_keyboard(tmp_path: Path) -> None:
    made = new_key_file(tmp_path / "a.key", "R. Kell", "u\u0308ber")
    assert len(made.secret("\u00fcber")) == 32


def test_an_encrypted_key_written_by_another_program_is_opened() -> None:
    key = ed25519.Ed25519PrivateKey.from_private_bytes(SECRET)
    text = key.private_bytes(Encoding.PEM, PrivateFormat.PKCS8, BestAvailableEncryption(b"xyz")).decode()
    assert pkcs8.read(text, "xyz", "it") == SECRET


@pytest.mark.skipif(os.name != "posix", reason="rights of a file")
def test_a_key_is_for_its_owner_alone(own_folder: Path) -> None:
    before = os.umask(0)
    try:
        made = keyring.new_key("R. Kell", None, None)
    finally:
        os.umask(before)
    assert stat.S_IMODE(made.path.stat().st_mode) == 0o600
    assert stat.S_IMODE(made.path.parent.stat().st_mode) == 0o700
    assert not made.readable_by_others
    made.path.chmod(0o644)
    assert read_key_file(made.path).readable_by_others


def test_nothing_is_overwritten(tmp_path: Path) -> None:
    made = keyring.new_key("R. Kell", None, None)
    kept = made.path.read_bytes()
    with pytest.raises(UsageError, match=r"a key of R\. Kell already"):
        keyring.new_key("R. Kell", None, None)
    for taken in (tmp_path / "a.key", tmp_path / "link.key"):
        if taken.name == "a.key":
            taken.write_text("mine")
        else:
            taken.symlink_to(tmp_path / "nowhere")
        with pytest.raises(UsageError, match="exists already"):
            new_key_file(taken, "R. Kell", None)
    assert (tmp_path / "a.key").read_text() == "mine"
    assert made.path.read_bytes() == kept
    assert list(tmp_path.glob(".*.part")) == []


def test_a_folder_that_is_not_there_is_said(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="cannot be written"):
        new_key_file(tmp_path / "none" / "a.key", "R. Kell", None)


MAKE = "import sys\nfrom pathlib import Path\nfrom fieldbook.signing.key_file import new_key_file\nprint('go', flush=True)\n"
MAKE += "for n in range(10000): new_key_file(Path(sys.argv[1]) / f'{n}.key', 'R. Kell', None)\n"


@pytest.mark.skipif(os.name != "posix", reason="kill -9")
def test_killed_at_any_moment_a_key_is_whole_or_not_there(tmp_path: Path) -> None:
    chance, whole = random.Random(5), 0
    root = Path(__file__).parents[2]
    for attempt in range(6):
        folder = tmp_path / str(attempt)
        folder.mkdir()
        child = subprocess.Popen([sys.executable, "-c", MAKE, folder], cwd=root, stdout=subprocess.PIPE)
        assert child.stdout is not None
        child.stdout.readline()
        time.sleep(chance.uniform(0.05, 0.3))
        child.send_signal(signal.SIGKILL)
        child.wait()
        child.stdout.close()
        for path in folder.glob("*.key"):
            assert len(read_key_file(path).secret()) == 32
            whole += 1
        assert all(stat.S_IMODE(path.stat().st_mode) == 0o600 for path in folder.iterdir())
    assert whole > 10


@pytest.mark.parametrize(
    "name", ["", " R. Kell", "R. Kell\n", "R.\u00a0Kell", "a\u202eb", "\x1b[2J", "x" * 121, "a\u200bb"]
)
def test_names_that_could_deceive_are_refused(name: str) -> None:
    with pytest.raises(UsageError) as caught:
        keyring.new_key(name, None, None)
    assert caught.value.code == "name"


@pytest.mark.parametrize("name", ["../../etc/passwd", "CON", "a/b\\c", "Ж. Ørsted", "R. Kell; rm"])
def test_a_name_is_no_path(own_folder: Path, name: str) -> None:
    made = keyring.new_key(name, None, None)
    assert made.path.parent == own_folder / "keys"
    assert made.path.name.removesuffix(".key").replace("-", "").isalnum()
    assert keyring.key_of(name) == made


def hostile() -> dict[str, str | bytes]:
    """Files that are no private keys of ours."""
    other = rsa.generate_private_key(65537, 2048)
    pem = {
        "rsa": other.private_bytes(Encoding.PEM, PrivateFormat.PKCS8, NoEncryption()).decode(),
        "ec": ec.generate_private_key(ec.SECP256R1())
        .private_bytes(Encoding.PEM, PrivateFormat.PKCS8, NoEncryption())
        .decode(),
    }
    key = public_of(SECRET, "R. Kell")
    head = f"{HEAD}\nName: R. Kell\nPublic-Key: {key.public.hex()}\nName-Signature: {key.name_signature.hex()}\nx\n\n"
    good = head + pkcs8.written(SECRET, None)
    return {
        "huge": b"x" * 50_000_000,
        "empty": "",
        "noise": random.Random(1).randbytes(2000),
        "rsa alone": pem["rsa"],
        "rsa under our head": head + pem["rsa"],
        "ec under our head": head + pem["ec"],
        "another secret": head + pkcs8.written(bytes(32), None),
        "another name": good.replace("Name: R. Kell", "Name: R. Kelly"),
        "another public key": good.replace(key.public.hex(), ours.public_of(bytes(32)).hex()),
        "two blocks": good + pkcs8.written(SECRET, None),
        "cut off": good[:-40],
        "damaged block": good.replace("MC4C", "MC4D"),
        "number of another curve": good.replace("K2VwBCIE", "K2VvBCIE"),  # OpenSSL itself gives up: found by fuzzing
        "no head": pkcs8.written(SECRET, None),
        "escapes in the name": good.replace("Name: R. Kell", "Name: \x1b[2JKell"),
    }


@pytest.mark.parametrize("what", sorted(hostile()))
def test_hostile_private_keys_are_refused(tmp_path: Path, what: str) -> None:
    data = hostile()[what]
    path = tmp_path / "a.key"
    path.write_bytes(data if isinstance(data, bytes) else data.encode())
    started = time.monotonic()
    with pytest.raises(UsageError) as caught:
        read_key_file(path).secret("x")
    assert caught.value.remedy
    assert time.monotonic() - started < 2


def test_a_folder_or_a_pipe_is_no_key(tmp_path: Path) -> None:
    with pytest.raises(UsageError):
        read_key_file(tmp_path)
    if hasattr(os, "mkfifo"):
        os.mkfifo(tmp_path / "pipe.key")
        with pytest.raises(UsageError, match="is no file"):
            read_key_file(tmp_path / "pipe.key")


@pytest.mark.usefixtures("cheap")
def test_a_file_that_would_cost_hours_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    block = pkcs8.written(SECRET, "x")
    monkeypatch.setattr(pkcs8, "MOST_ROUNDS", 999)
    with pytest.raises(UsageError, match="in a way Fieldbook does not open"):
        pkcs8.read(block, "x", "it")


def public_text() -> str:
    return to_toml(public_of(SECRET, "R. Kell"))


def test_a_public_key_goes_from_hand_to_hand(tmp_path: Path) -> None:
    path = tmp_path / "kell.toml"
    path.write_text(public_text(), encoding="utf-8")
    key = read_public(path)
    assert key == public_of(SECRET, "R. Kell")
    assert SECRET.hex() not in public_text()
    assert "PRIVATE" not in public_text()
    stored = keyring.add_trusted(key)
    assert stored.read_text(encoding="utf-8") == public_text()
    with pytest.raises(UsageError, match="already"):
        keyring.add_trusted(key)
    assert keyring.trust().standing("R. Kell", key.public) is keyring.Standing.TRUSTED


def test_any_changed_character_of_a_public_key_file_is_found() -> None:
    text = public_text()
    start = text.index("schema")
    for place in range(start, len(text)):
        if text[place].isspace() or text[place] in "=\"'":
            continue
        new = "0" if text[place] != "0" else "1"
        with pytest.raises(UsageError):
            from_toml(text[:place] + new + text[place + 1 :], "it")


def hostile_public() -> dict[str, str]:
    text = public_text()
    pem = (
        rsa.generate_private_key(65537, 2048).public_key().public_bytes(Encoding.PEM, PublicFormat.SubjectPublicKeyInfo)
    )
    block = text[text.index("-----BEGIN") : text.index("'''\nname_signature")]
    return {
        "nothing": "",
        "no toml": "\x00\x01",
        "nested": "a = " + "[" * 5000,
        "rsa": text.replace(block, pem.decode()),
        "another key": text + "\nmore = 1",
        "number": text.replace('name = "R. Kell"', "name = 5"),
        "private": pkcs8.written(SECRET, None),
    }


@pytest.mark.parametrize("what", sorted(hostile_public()))
def test_hostile_public_keys_are_refused(what: str) -> None:
    with pytest.raises(UsageError) as caught:
        from_toml(hostile_public()[what], "it")
    assert caught.value.remedy


def test_a_huge_public_key_file_is_not_read(tmp_path: Path) -> None:
    path = tmp_path / "a.toml"
    with path.open("wb") as file:
        file.truncate(1 << 32)
    with pytest.raises(UsageError, match="larger than any public key"):
        read_public(path)


@pytest.mark.usefixtures("cheap")
def test_which_key_is_used_without_asking() -> None:
    assert signer_without_asking("R. Kell") == (None, "no key of R. Kell on this computer")
    made = keyring.new_key("R. Kell", None, None)
    signer, why = signer_without_asking("R. Kell")
    assert signer is not None
    assert (signer.public, why) == (made.key.public, "")
    assert signer_without_asking("r. kell")[0] is None  # exactly that name
    keyring.new_key("A. Marlow", "secret", None)
    assert signer_without_asking("A. Marlow") == (None, "the key of A. Marlow asks for a passphrase")
    copy = made.path.with_name("copy.key")
    copy.write_bytes(made.path.read_bytes())
    assert "Several keys are named R. Kell" in signer_without_asking("R. Kell")[1]
    copy.write_bytes(b"no key")
    assert signer_without_asking("R. Kell")[0] is not None
    assert len(keyring.own_keys()[1]) == 1
