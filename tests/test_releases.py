"""Releases: frozen, read back, proved, one after another; and versions that must follow the meaning."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey, Ed25519PublicKey
from cryptography.hazmat.primitives.serialization import Encoding, NoEncryption, PrivateFormat, PublicFormat

from house_folder import change, make_house
from weldbasis.authority.changes import differences_between
from weldbasis.authority.releases import knowledge_of_release, news, release_data, releases_of, version_problems
from weldbasis.cases import run_cases
from weldbasis.evaluate import evaluate
from weldbasis.graph import build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import knowledge_of, load_knowledge
from weldbasis.load.layers import read_layers
from weldbasis.load.release import read_release
from weldbasis.load.signature import sign, signature_fault
from weldbasis.places import kb_folder, site_folder
from weldbasis.problem import Refused
from weldbasis.project import read_project
from weldbasis.record import canonical_bytes, record_of

TABLE = "rules/preheat/min-preheat.yaml"


@pytest.fixture
def house(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    return make_house(tmp_path)


def freeze(folder: Path, name: str, key: Ed25519PrivateKey | None = None) -> Path:
    releases = releases_of(folder)
    data = release_data(read_layers(folder), name, "2027-01-15", releases[-1] if releases else None, key)
    path = folder / "releases" / f"{name}.json"
    path.parent.mkdir(exist_ok=True)
    path.write_bytes(canonical_bytes(data))
    return path


def said(folder: Path, release: str) -> str:
    with pytest.raises(Refused) as caught:
        load_knowledge(folder, release=release)
    return str(caught.value)


def test_the_published_rules_come_back_as_they_were(tmp_path: Path, knowledge: Knowledge) -> None:
    """The whole of kb/ frozen and read back: the same records, and the same record of a project but for the release."""
    folder = tmp_path / "kb"
    shutil.copytree(kb_folder(), folder, ignore=shutil.ignore_patterns("releases"))
    path = freeze(folder, "2027.1")
    back = load_knowledge(folder, release="2027.1")
    assert (back.release, back.digest) == ("2027.1", json.loads(path.read_bytes())["digest"])
    assert differences_between(knowledge, back) == ()
    assert back.cases == ()
    project = site_folder() / "projects" / "millrace-footbridge"
    records = []
    for rules in (knowledge, back):
        chosen = read_project(project, rules)
        records.append(record_of(chosen, evaluate(rules, chosen.facts)))
    assert records[0]["joints"] == records[1]["joints"]
    assert records[0]["inputs"] == records[1]["inputs"]


def test_a_release_stays_usable_when_the_working_rules_move_on(house: Path) -> None:
    freeze(house, "2027.1")
    before = load_knowledge(house, release="2027.1")
    change(house / TABLE, "give: 90", "give: 95")
    change(house.parent / "kb/rules/heat/heat-input-arc.yaml", "0.8*U", "0.9*U")
    after = load_knowledge(house, release="2027.1")
    assert after.digest == before.digest
    assert after.rules["min-preheat"].body["rows"][1]["give"] == 90
    assert after.rules["heat-input-arc"].body["formula"].startswith("0.8")
    assert load_knowledge(house).rules["min-preheat"].body["rows"][1]["give"] == 95


def test_a_house_may_stand_on_a_release(house: Path) -> None:
    freeze(house.parent / "kb", "2026.2")
    change(house / "kb.yaml", "stands_on: ../kb", 'stands_on: ../kb\nstands_on_release: "2026.2"')
    change(house.parent / "kb/rules/heat/heat-input-arc.yaml", "0.8*U", "0.9*U")
    assert load_knowledge(house).rules["heat-input-arc"].body["formula"].startswith("0.8")


def test_a_release_edited_by_hand_is_refused(house: Path) -> None:
    path = freeze(house, "2027.1")
    path.write_bytes(path.read_bytes().replace(b'"give":90', b'"give":60'))
    assert "this release was edited after it was frozen" in said(house, "2027.1")
    path.write_bytes(path.read_bytes()[:-40])
    assert "this is no JSON" in said(house, "2027.1")


def test_a_release_under_another_name_is_refused(house: Path) -> None:
    freeze(house, "2027.1").rename(house / "releases/2027.2.json")
    assert "this is release '2027.1', not '2027.2'" in said(house, "2027.2")
    text = said(house, "2027.1")
    assert "there is no release '2027.1'" in text
    assert "there are 2027.2" in text


def pem(key: Ed25519PrivateKey, path: Path) -> Path:
    path.write_bytes(key.public_key().public_bytes(Encoding.PEM, PublicFormat.SubjectPublicKeyInfo))
    return path


def test_signatures_hold_for_their_key_and_their_release_only(house: Path) -> None:
    key, other = Ed25519PrivateKey.generate(), Ed25519PrivateKey.generate()
    pem(key, house / "authority.pem")
    change(house / "kb.yaml", "stands_on", "public_key: authority.pem\nstands_on")
    freeze(house, "2027.1")
    assert "release '2027.1' is not signed" in said(house, "2027.1")
    (house / "releases/2027.1.json").unlink()
    path = freeze(house, "2027.1", key)
    assert load_knowledge(house, release="2027.1").release == "2027.1"
    pem(other, house / "authority.pem")
    assert "release '2027.1' is signed with another key" in said(house, "2027.1")
    pem(key, house / "authority.pem")
    data = json.loads(path.read_bytes())
    data["signature"]["value"] = sign("sha256:" + "0" * 64, key)["value"]
    path.write_bytes(canonical_bytes(data))
    assert "carries a signature of something else" in said(house, "2027.1")
    (house / "authority.pem").write_bytes(key.private_bytes(Encoding.PEM, PrivateFormat.PKCS8, NoEncryption()))
    assert "this is no public key in PEM form" in said(house, "2027.1")


# RFC 8032, 7.1: secret key, public key, message, signature.
RFC_8032 = [
    ("9d61b19deffd5a60ba844af492ec2cc44449c5697b326919703bac031cae7f60",
     "d75a980182b10ab7d54bfed3c964073a0ee172f3daa62325af021a68f707511a", "",
     "e5564300c360ac729086e2cc806e828a84877f1eb8e5d974d873e065224901555fb8821590a33bacc61e39701cf9b46bd25bf5f0595bbe24655141438e7a100b"),
    ("4ccd089b28ff96da9db6c346ec114e0f5b8a319f35aba624da8cf6ed4fb8a6fb",
     "3d4017c3e843895a92b70aa74d1b7ebc9c982ccf2ec4968cc0cd55f12af4660c", "72",
     "92a009a9f0d4cab8720e820b5f642540a2b27b5416503f8fb3762223ebdb69da085ac1e43e15996e458f3613d0f11d8c387b2eaeb4302aeeb00d291612bb0c00"),
    ("c5aa8df43f9f837bedb7442f31dcb7b166d38535076f094b85ce3a2e0b4458f7",
     "fc51cd8e6218a1a38da47ed00230f0580816ed13ba3303ac5deb911548908025", "af82",
     "6291d657deec24024827e69c3abe01a30ce548a284743a445e3680d7db5ac3ac18ff9b538d16f290ae67f760984dc6594a7c15e9716ed28dc027beceea1ec40a"),
]  # fmt: skip


@pytest.mark.parametrize(("secret", "public", "message", "signature"), RFC_8032)
def test_signatures_meet_rfc_8032(secret: str, public: str, message: str, signature: str) -> None:
    key = Ed25519PrivateKey.from_private_bytes(bytes.fromhex(secret))
    assert key.public_key().public_bytes_raw().hex() == public
    assert key.sign(bytes.fromhex(message)).hex() == signature
    Ed25519PublicKey.from_public_bytes(bytes.fromhex(public)).verify(bytes.fromhex(signature), bytes.fromhex(message))


def test_a_signature_proves_one_digest() -> None:
    key = Ed25519PrivateKey.generate()
    signature = sign("sha256:aa", key)
    assert signature_fault(signature, "sha256:aa", key.public_key()) == ""
    assert signature_fault(signature, "sha256:ab") == "carries a signature of something else"
    assert signature_fault({**signature, "value": "§"}, "sha256:aa") == "carries a signature that cannot be read"
    assert signature_fault(None, "sha256:aa") == "is not signed"


# RFC 8785, 3.2.2 and 3.2.3: numbers, strings and the order of keys.
def test_canonical_json_meets_rfc_8785() -> None:
    numbers = {
        "numbers": [333333333.33333329, 1e30, 4.50, 2e-3, 0.000000000000000000000000001],
        "string": '\u20ac$\u000f\nA\'B"\\\\"/',
        "literals": [None, True, False],
    }
    wanted = (
        '{"literals":[null,true,false],"numbers":[333333333.3333333,1e+30,4.5,0.002,1e-27],'
        '"string":"€$\\u000f\\nA\'B\\"\\\\\\\\\\"/"}\n'
    )
    assert canonical_bytes(numbers).decode() == wanted
    keys = {"\u20ac": 1, "\r": 2, "\ufb33": 3, "1": 4, "\U0001f600": 5, "\u0080": 6, "\u00f6": 7}
    order = [2, 4, 6, 7, 1, 5, 3]
    assert list(json.loads(canonical_bytes(keys)).values()) == order


def test_releases_stand_in_one_line(house: Path) -> None:
    freeze(house, "2027.1")
    change(house / TABLE, "give: 90", "give: 95")
    second = freeze(house, "2027.2")
    assert [release.name for release in releases_of(house)] == ["2027.1", "2027.2"]
    (house / "releases/2027.1.json").unlink()
    with pytest.raises(Refused) as caught:
        releases_of(house)
    assert "0 releases stand as the first; exactly one can" in str(caught.value)
    freeze_first = release_data(read_layers(house), "2027.1", "2027-01-15", None)
    (house / "releases/2027.1.json").write_bytes(canonical_bytes(freeze_first))
    with pytest.raises(Refused) as caught:
        releases_of(house)
    assert "release '2027.2' follows another '2027.1' than the one that lies here" in str(caught.value)
    second.unlink()
    assert len(releases_of(house)) == 1


def moved(house: Path) -> list[str]:
    return [problem.what for problem in version_problems(load_knowledge(house), releases_of(house))]


def test_meaning_without_a_new_version_is_refused_spelling_is_not(house: Path) -> None:
    freeze(house, "2027.1")
    arc = house.parent / "kb/rules/heat/heat-input-arc.yaml"
    change(arc, '"0.8*U*I*60/v/1000"', '"0.80 * U * I * (60 / v / 1000) * 1"')
    assert moved(house) == [
        "rule heat-input-arc asks for something else than in release 2027.1, and is still version 1"
    ]
    change(arc, '"0.80 * U * I * (60 / v / 1000) * 1"', '"0.80 *U * I*60 / v/1e3"')
    change(arc, "kind: formula\n", "")
    change(arc, "id: heat-input-arc\n", "kind: formula   # a comment\nid: heat-input-arc\n")
    change(house / TABLE, '"(30, 100]", restraint: high', '" ( 30.0, 100 ]", restraint: high')
    change(house / TABLE, "title: Preheat by thickness, yard", "title: Preheat of the yard")
    assert moved(house) == []
    change(house / TABLE, "give: 90", "give: 91")
    assert moved(house) == ["rule min-preheat asks for something else than in release 2027.1, and is still version 3"]
    change(house / TABLE, "version: 3", "version: 4")
    with pytest.raises(Refused) as caught:
        moved(house)
    assert "rule min-preheat is version 4, its last changes entry is of 3" in str(caught.value)
    entry = '  - {version: 4, date: "2027-02-01", what: 91 °C, why: Crayons., approved_by: welding authority}\n'
    with (house / TABLE).open("a", encoding="utf-8") as file:
        file.write(entry)
    assert moved(house) == []


def test_ids_are_never_used_again(house: Path) -> None:
    freeze(house, "2027.1")
    lamps = house / "rules/yard/yard-lamps.yaml"
    text, amendments = lamps.read_text(encoding="utf-8"), (house / "amendments.yaml").read_text(encoding="utf-8")
    lamps.unlink()
    entry = "  - {rule: yard-lamps, how: add, why: Lamps of the hall are weak., approved_by: welding authority}\n"
    change(house / "amendments.yaml", entry, "")
    freeze(house, "2027.2")
    lamps.write_text(text.replace("> 80", "> 90"), encoding="utf-8")
    (house / "amendments.yaml").write_text(amendments, encoding="utf-8")
    assert moved(house) == ["rule id 'yard-lamps' was used before release 2027.2 for a rule that was withdrawn"]


def test_news_tells_results_from_words(house: Path) -> None:
    freeze(house, "2027.1")
    change(house / TABLE, "give: 90", "give: 95")
    change(house / TABLE, "version: 3\n", "version: 4\n")
    with (house / TABLE).open("a", encoding="utf-8") as file:
        file.write('  - {version: 4, date: "2027-02-01", what: 95 °C., why: Steps., approved_by: welding authority}\n')
    change(house / "rules/yard/yard-lamps.yaml", "title: Lamps", "title: Weak lamps")
    freeze(house, "2027.2")
    text = news("Rules of the yard", releases_of(house))
    new, old = text.split("## 2027.1")
    results, words = new.split("### Does not change results")
    assert "- rule `min-preheat` changed" in results
    assert "version 4: 95 °C. Steps. (welding authority)" in results
    assert "body.rows 2.give: 90.0 → 95.0" in results
    assert "- rule `yard-lamps` changed" in words
    assert "title: Lamps → Weak lamps" in words
    assert "- quantity `restraint`, relax: Frames here are free. Justified by survey of 40 frames." in old
    assert text == news("Rules of the yard", releases_of(house))


def test_what_a_release_holds_is_enough(house: Path) -> None:
    """A release alone, in an empty folder, makes the same rules."""
    path = freeze(house, "2027.1")
    release = read_release(path)
    shutil.rmtree(house.parent / "kb")
    rules = knowledge_of_release(release)
    assert run_cases(rules, build_graph(rules)) == ()
    assert rules.rules["min-preheat"].body["rows"][1]["give"] == 90
    with pytest.raises(Refused):
        knowledge_of(read_layers(house))
