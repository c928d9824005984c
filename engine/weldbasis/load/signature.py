"""Ed25519 signatures (RFC 8032) of digests: keys from PEM files, signing and proving. Keys stay with their owners."""

from __future__ import annotations

import base64
import binascii
from collections.abc import Mapping
from pathlib import Path

from cryptography.exceptions import InvalidSignature, UnsupportedAlgorithm
from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey, Ed25519PublicKey
from cryptography.hazmat.primitives.serialization import load_pem_private_key, load_pem_public_key


class BadKey(ValueError):
    """A file that holds no key of the wanted sort."""


def read_private_key(path: Path) -> Ed25519PrivateKey:
    """The private key in a PEM file without a password. Raises BadKey."""
    try:
        key = load_pem_private_key(path.read_bytes(), password=None)
    except (OSError, ValueError, TypeError, UnsupportedAlgorithm) as fault:
        raise BadKey("this is no private key in PEM form without a password") from fault
    if not isinstance(key, Ed25519PrivateKey):
        raise BadKey("this private key is not of the kind Ed25519")
    return key


def read_public_key(path: Path) -> Ed25519PublicKey:
    """The public key in a PEM file. Raises BadKey."""
    try:
        key = load_pem_public_key(path.read_bytes())
    except (OSError, ValueError, UnsupportedAlgorithm) as fault:
        raise BadKey("this is no public key in PEM form") from fault
    if not isinstance(key, Ed25519PublicKey):
        raise BadKey("this public key is not of the kind Ed25519")
    return key


def sign(digest: str, key: Ed25519PrivateKey) -> dict[str, str]:
    """A signature of a digest with its public key, both in base64."""
    value, public = key.sign(digest.encode("ascii")), key.public_key().public_bytes_raw()
    return {"public_key": base64.b64encode(public).decode(), "value": base64.b64encode(value).decode()}


def signature_fault(signature: Mapping[str, str] | None, digest: str, wanted: Ed25519PublicKey | None = None) -> str:
    """What is wrong with a signature of a digest, as the end of a sentence; empty where it holds.

    `wanted` is the key it must be made with; without it the signature must fit the key that stands beside it.
    """
    if not signature:
        return "is not signed"
    try:
        public = base64.b64decode(signature["public_key"], validate=True)
        value = base64.b64decode(signature["value"], validate=True)
        key = Ed25519PublicKey.from_public_bytes(public)
    except (KeyError, ValueError, binascii.Error):
        return "carries a signature that cannot be read"
    if wanted is not None and public != wanted.public_bytes_raw():
        return "is signed with another key"
    try:
        key.verify(value, digest.encode("ascii", "replace"))
    except InvalidSignature:
        return "carries a signature of something else"
    return ""
