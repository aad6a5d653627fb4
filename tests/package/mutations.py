"""Mutated packages: whatever a file holds, it is used or refused, soon and within bounds.

`python -m tests.package.mutations [--count 2000]` makes packages from sound ones by flipping bits, cutting, swapping
and repeating members, changing texts inside parts and packing bombs, and puts each through opening, reading, grafting
and stripping in a process whose memory is watched.
"""

from __future__ import annotations

import argparse
import multiprocessing
import random
import re
import resource
import struct
import sys
import time
import traceback
import zipfile
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

from bridge.messages import FileRefused
from bridge.package.graft import graft
from bridge.package.package import Package
from bridge.package.strip import strip
from bridge.package.user_objects import user_objects
from tests.package import corpus, samples, synthetic, zips

MOST_SECONDS, MOST_MEGABYTES = 5.0, 512


def sound() -> list[bytes]:
    """What mutations start from: plain, grafted, strict, with comments, and a few of the corpus."""
    plain = samples.plain_workbook()
    chosen = [path.read_bytes() for path in corpus.files() if path.stat().st_size < 60_000][::40]
    return [plain, samples.grafted(plain), synthetic.strict(), synthetic.threaded_comments(),
            synthetic.custom_views_and_chain(), synthetic.streamed(), synthetic.zip64(), *chosen]  # fmt: skip


# --- mutations -----------------------------------------------------------------------------------------------------


def flip_bits(data: bytes, rng: random.Random) -> bytes:
    out = bytearray(data)
    for _ in range(rng.choice((1, 1, 2, 8, 64))):
        at = rng.randrange(len(out))
        out[at] ^= 1 << rng.randrange(8)
    return bytes(out)


def flip_directory(data: bytes, rng: random.Random) -> bytes:
    """Bits of the list of members, where sizes, offsets and names stand."""
    out = bytearray(data)
    start = max(0, data.find(b"PK\x01\x02"))
    for _ in range(rng.choice((1, 2, 4))):
        out[rng.randrange(start, len(out))] ^= 1 << rng.randrange(8)
    return bytes(out)


def cut(data: bytes, rng: random.Random) -> bytes:
    at, length = rng.randrange(len(data)), rng.choice((1, 10, 1000, len(data)))
    return data[:at] + data[at + length :]


def put_in(data: bytes, rng: random.Random) -> bytes:
    at = rng.randrange(len(data))
    return data[:at] + rng.randbytes(rng.choice((1, 4, 100))) + data[at:]


def _parts(data: bytes) -> dict[str, bytes]:
    try:
        return zips.members(data)
    except (zipfile.BadZipFile, OSError, KeyError):
        return zips.members(samples.plain_workbook())


def swap_members(data: bytes, rng: random.Random) -> bytes:
    parts = _parts(data)
    one, other = rng.choice(list(parts)), rng.choice(list(parts))
    parts[one], parts[other] = parts[other], parts[one]
    return zips.build(parts)


def drop_member(data: bytes, rng: random.Random) -> bytes:
    parts = _parts(data)
    for _ in range(rng.choice((1, 1, 3))):
        parts.pop(rng.choice(list(parts)), None)
        if not parts:
            break
    return zips.build(parts)


def rename_member(data: bytes, rng: random.Random) -> bytes:
    parts = _parts(data)
    name = rng.choice(list(parts))
    new = rng.choice(
        ["../" + name, "/" + name, name.upper(), name.replace("/", "\\"), "", "a\0b", "C:" + name, name + "/"]
    )
    return zips.build({new if each == name else each: content for each, content in parts.items()})


_ODD = ["", "-1", "0", "99999999999999999999", "1e999", "nan", "\u0660\u0661", "rId1", "#REF!", "x" * 5000, "&#0;", "'",
        "/", "..", "../../x", "true", "http://example.org/x", "]]>", "<!--", "_xlnm.Print_Area",
        "_savefit.sheet.fit_rows", "_savefit.laid.fit_rows", "2147483648", "\u00b2"]  # fmt: skip


def change_value(data: bytes, rng: random.Random) -> bytes:
    """An attribute or a text inside a part becomes something odd."""
    parts = _parts(data)
    chosen = [name for name in parts if name.endswith((".xml", ".rels"))] or list(parts)
    for _ in range(rng.choice((1, 1, 2, 5))):
        name = rng.choice(chosen)
        text = parts[name].decode("utf-8", "replace")
        places = list(re.finditer(r'"[^"<>]*"|>[^<>]*<', text))
        if places:
            place = rng.choice(places)
            odd = rng.choice(_ODD)
            text = text[: place.start() + 1] + odd + text[place.end() - 1 :]
        parts[name] = text.encode()
    return zips.build(parts)


def change_elements(data: bytes, rng: random.Random) -> bytes:
    """An element goes, comes twice, or gets another name or many copies."""
    parts = _parts(data)
    name = rng.choice([each for each in parts if each.endswith((".xml", ".rels"))] or list(parts))
    text = parts[name].decode("utf-8", "replace")
    places = list(re.finditer(r"<[A-Za-z][^<>]*/>", text))
    if places:
        place = rng.choice(places)
        new = rng.choice(["", place[0] * 2, place[0] * 3000, "<x>", "<" * 20, place[0].replace("<", "<q:", 1),
                          f"<!-- {place[0]} -->", "<![CDATA[x]]>", "<a>" * 400 + "</a>" * 400])  # fmt: skip
        text = text[: place.start()] + new + text[place.end() :]
    parts[name] = text.encode()
    return zips.build(parts)


def bomb(data: bytes, rng: random.Random) -> bytes:
    """A part that unpacks to very much: blanks, elements, attributes, a deep nest, entities, a lie about its size."""
    parts = _parts(data)
    name = rng.choice(list(parts))
    size = rng.choice((1 << 20, 30 << 20, 100 << 20))
    kind = rng.randrange(6)
    head = parts[name][: parts[name].rfind(b"</")] if b"</" in parts[name] else b"<a>"
    fill = (b" ", b"<a/>", b"<a b='' c='' d=''/>", b"<a>", b"x", b"<c r='A1'/>")[kind]
    parts[name] = head + fill * (size // len(fill))
    if rng.random() < 0.3:
        parts[name] = b'<!DOCTYPE a [<!ENTITY b "' + b"b" * 1000 + b'">]><a>' + b"&b;" * 100_000 + b"</a>"
    out = zips.build(parts)
    if rng.random() < 0.3:
        out = out.replace(struct.pack("<L", len(parts[name])), struct.pack("<L", rng.choice((0, 10, 0x7FFFFFFF))))
    return out


def shared_bytes(data: bytes, rng: random.Random) -> bytes:
    """Directory entries that lead to other members' bytes."""
    out = bytearray(data)
    entries = [found.start() for found in re.finditer(b"PK\x01\x02", data)]
    if len(entries) > 1:
        one, other = rng.sample(entries, 2)
        out[one + 42 : one + 46] = out[other + 42 : other + 46]
    return bytes(out)


MUTATIONS: list[Callable[[bytes, random.Random], bytes]] = [
    flip_bits, flip_directory, cut, put_in, swap_members, drop_member, rename_member, change_value, change_value,
    change_value, change_elements, change_elements, bomb, shared_bytes,
]  # fmt: skip


# --- running -------------------------------------------------------------------------------------------------------


def use(data: bytes) -> str:
    """Everything the bridge does with a package; `used`, or the key of the reason it was refused for."""
    try:
        package = Package.open(data)
        for sheet in package.sheets:
            _ = sheet.empty
            if sheet.part:
                package.tables(sheet.name)
        user_objects(package)
        tabs = {sheet.ours: sheet.name for sheet in package.sheets}
        sheets = [samples.request_sheet(tabs.get("fit request", "")), samples.rows_sheet(1, tabs.get("fit rows", ""))]
        new = graft(package, sheets, samples.names(), samples.STATE)
        strip(Package.open(new))
        strip(package)
    except FileRefused as refusal:
        return refusal.problem.key
    return "used"


@dataclass
class Outcome:
    """What became of the mutated packages."""

    ends: Counter[str] = field(default_factory=Counter)
    unhandled: list[str] = field(default_factory=list)
    slow: list[str] = field(default_factory=list)
    changed: int = 0
    slowest: float = 0.0
    megabytes: float = 0.0

    @property
    def sound(self) -> bool:
        """Whether every bound held."""
        return not self.unhandled and not self.slow and not self.changed and self.megabytes < MOST_MEGABYTES


def run(count: int, seed: int = 1) -> Outcome:
    """`count` mutated packages, in this process."""
    rng, outcome, starts = random.Random(seed), Outcome(), sound()
    for number in range(count):
        mutation = MUTATIONS[number % len(MUTATIONS)]
        data = mutation(rng.choice(starts), rng)
        before = hash(data)
        start = time.monotonic()
        try:
            outcome.ends[use(data)] += 1
        except Exception:
            outcome.unhandled.append(f"{number} {mutation.__name__}: {traceback.format_exc(limit=-4)}")
        seconds = time.monotonic() - start
        outcome.slowest = max(outcome.slowest, seconds)
        if seconds > MOST_SECONDS:
            outcome.slow.append(f"{number} {mutation.__name__}: {seconds:.1f} s")
        outcome.changed += hash(bytes(data)) != before
    return outcome


def _child(count: int, seed: int, sender) -> None:  # type: ignore[no-untyped-def]
    outcome = run(count, seed)
    outcome.megabytes = peak_megabytes()
    sender.send(outcome)


def peak_megabytes() -> float:
    """The greatest memory this program has held. On Linux not getrusage's: that keeps the parent's across exec."""
    status = Path("/proc/self/status")
    if status.exists():
        line = next(line for line in status.read_text().splitlines() if line.startswith("VmHWM:"))
        return int(line.split()[1]) / 1024
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


def run_watched(count: int, seed: int = 1) -> Outcome:
    """The same in a process of its own, whose greatest memory is reported (making the bombs included)."""
    receiver, sender = multiprocessing.Pipe(duplex=False)
    child = multiprocessing.get_context("spawn").Process(target=_child, args=(count, seed, sender))
    child.start()
    sender.close()
    try:
        return receiver.recv()
    finally:
        child.join()


def main() -> int:
    """Run and print the figures."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--count", type=int, default=2000)
    parser.add_argument("--seed", type=int, default=1)
    arguments = parser.parse_args()
    outcome = run_watched(arguments.count, arguments.seed)
    print(f"{'mutated packages':40} {arguments.count}")
    print(f"{'used / refused with reason / unhandled':40} {outcome.ends['used']} / "
          f"{sum(outcome.ends.values()) - outcome.ends['used']} / {len(outcome.unhandled)}")  # fmt: skip
    print(f"{'slowest':40} {outcome.slowest:.2f} s (bound {MOST_SECONDS:.0f} s)")
    print(f"{'greatest memory':40} {outcome.megabytes:.0f} MB (bound {MOST_MEGABYTES} MB)")
    print(f"{'original changed':40} {outcome.changed}")
    print(*(f"    {count:5}  {key}" for key, count in outcome.ends.most_common()), sep="\n")
    print(*outcome.unhandled, *outcome.slow, sep="\n")
    return 0 if outcome.sound else 1


if __name__ == "__main__":
    sys.exit(main())
