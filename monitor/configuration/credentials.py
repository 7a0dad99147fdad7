"""The files by which broker and daemon know each other: the password, certificates and their key.

Knows what such files hold. Must not know the broker. No text of theirs, and not the password file's
name, ever stands in an error: someone will write the secret where its file should be.
"""

from __future__ import annotations

import ssl
from collections.abc import Iterator
from pathlib import Path

from monitor import secrets_file
from monitor.configuration.complaints import Complaint
from monitor.configuration.problems import Path as KeyPath
from monitor.configuration.problems import Problem, dotted
from monitor.configuration.yamltree import Node, at


def password(tree: Node, folder: Path) -> tuple[str | None, list[Complaint]]:
    """What ``broker.password_file`` holds; a final line end does not count."""
    path = ("broker", "password_file")
    node = at(tree, path)
    if node is None or not isinstance(node.value, str):
        return None, []
    try:
        return secrets_file.read(folder / node.value), []
    except ValueError as error:
        wrong = str(error)
    instead = "write the path of a file that holds the password and nothing else"
    return None, [_complaint(node, path, wrong, instead)]


def certificates(tree: Node, folder: Path) -> Iterator[Complaint]:
    """What is wrong with the files of ``broker.tls``, found by loading them as the client will."""
    found = {key: at(tree, ("broker", "tls", key)) for key in ("ca", "certificate", "key")}
    nodes = {key: node for key, node in found.items() if node and isinstance(node.value, str)}
    paths = {key: str(folder / str(node.value)) for key, node in nodes.items()}
    readable = True
    for key, path in paths.items():
        try:
            with open(path, "rb"):
                continue
        except OSError as error:
            wrong = f"cannot be read ({error.strerror})"
        except ValueError:
            wrong = "has no such name"
        readable = False
        yield _complaint(nodes[key], ("broker", "tls", key), wrong, "write a readable file's path")
    if not readable:
        return
    context = ssl.SSLContext(ssl.PROTOCOL_TLS_CLIENT)
    if "ca" in paths:
        try:
            context.load_verify_locations(paths["ca"])
        except ssl.SSLError:
            wrong, instead = "holds no certificate in PEM", "name the authority's certificate"
            yield _complaint(nodes["ca"], ("broker", "tls", "ca"), wrong, instead)
    if "certificate" in paths:
        try:
            # An encrypted key would wait for somebody to type; an empty answer ends that.
            context.load_cert_chain(paths["certificate"], paths.get("key"), lambda: "")
        except ssl.SSLError as error:
            key = "key" if "key" in paths else "certificate"
            yield _complaint(nodes[key], ("broker", "tls", key), *_unsuited(key, error))


def _unsuited(key: str, error: ssl.SSLError) -> tuple[str, str]:
    if error.reason == "KEY_VALUES_MISMATCH":
        return "holds the key of another certificate", "name the key that was made with it"
    if key == "certificate":
        wrong = "does not hold a certificate with its key"
        return wrong, "name the key's file in key:, or write both into this one, in PEM"
    instead = "name PEM files of a certificate and of its own key, without a pass phrase"
    return "does not go with the certificate", instead


def _complaint(node: Node, path: KeyPath, wrong: str, instead: str) -> Complaint:
    problem = Problem(node.file, node.line, dotted(path), f"the file {wrong}", instead)
    return Complaint(path, problem)
