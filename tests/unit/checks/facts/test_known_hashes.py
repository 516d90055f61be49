"""The compact memory of what was seen before."""

import random
import tracemalloc

from auditd.checks.facts.known_hashes import KnownHashes, Names


def test_it_answers_as_a_dict_does_through_every_merge():
    """50,000 puts, a tenth of them again under an earlier hash, with negative and extreme hashes."""
    rng = random.Random(1)
    known, wanted = KnownHashes(), {}
    for number in range(50_000):
        again = wanted and rng.random() < 0.1
        name = rng.choice((-(2**63), 2**63 - 1, 0, 7)) if again else rng.randrange(-(2**63), 2**63)
        assert known.get(name) == wanted.get(name)
        known.put(name, number)
        wanted[name] = number
    assert len(known) == len(wanted)
    assert all(known.get(name) == number for name, number in wanted.items())
    assert known.get(12345) is None


def test_names_come_back_as_they_were():
    """Any text, also empty, beyond ASCII and with a lone surrogate."""
    texts = ["r1", "", "größe", "\udcff", "a\nb", "日本"] * 3
    names = Names()
    assert [names.add(text) for text in texts] == list(range(len(texts)))
    assert [names[number] for number in range(len(names))] == texts


def test_an_entry_takes_less_than_64_bytes():
    """100,000 entries with names of seven letters."""
    tracemalloc.start()
    try:
        known, names = KnownHashes(), Names()
        for number in range(100_000):
            known.put(hash(str(number)), names.add(f"r{number:06d}"))
        held, _peak = tracemalloc.get_traced_memory()
    finally:
        tracemalloc.stop()
    assert held / 100_000 < 64
