# SPDX-License-Identifier: GPL-3.0-or-later
"""Falsified copies of a certificate that was verified: check_certificate.py must refuse each."""
import copy


def falsified(checker, good):
    """Copies with one number changed: what it was, which of check_certificate.REASONS must speak
    against it (None: the form already does), the copy."""
    def copy_of(change):
        c = copy.deepcopy(good)
        change(c)
        return c
    middle = len(good["pieces"]) // 2
    drive = checker.m.n_drive // 2

    def width(c):
        p = c["pieces"][middle]
        return p["drive_high"][drive] - p["drive_low"][drive]

    def narrow(name, sign):
        def change(c):
            c["pieces"][middle][name][drive] += sign * 1e-3 * width(c)
        return change

    def more(name, factor):
        def change(c):
            for p in c["pieces"]:
                p["margin"][name] *= factor
        return change

    def set_(path, value):
        def change(c):
            at = c
            for key in path[:-1]:
                at = at[key]
            at[path[-1]] = value(at[path[-1]])
        return change
    form = None
    yield "drive_low too high", 2, copy_of(narrow("drive_low", 1))
    yield "drive_high too low", 2, copy_of(narrow("drive_high", -1))
    yield "hold too large", 3, copy_of(set_(("pieces", middle, "hold"), lambda h: h * 1e6))
    yield "hold missing", form, copy_of(set_(("pieces", middle, "hold"), lambda h: 0.0))
    yield "a gap", form, copy_of(set_(("pieces", middle, "low"), lambda x: x + 2.0 ** -20))
    yield "an end short of 1", form, copy_of(set_(("pieces", -1, "high"),
                                                  lambda x: x - 2.0 ** -20))
    yield "another end", 2, copy_of(set_(("to", "position", 0), lambda x: x + 1e-3))
    yield "another start", 2, copy_of(set_(("from", "position", 1), lambda x: x + 1e-3))
    yield "more speed", 4, copy_of(more("speed", 1.02))
    yield "more accuracy", 5, copy_of(more("accuracy", 1.2))
    if checker.m.n_drive == checker.m.n_output:
        yield "more load", 6, copy_of(more("load", 1.2))
    yield "less than asked", form, copy_of(set_(
        ("at_least", "speed"), lambda x: 1.001 * good["pieces"][middle]["margin"]["speed"]))
    if checker.m.doc.get("modes"):
        other = [n for n in checker.m.doc["modes"]
                 if checker.m.named(n) != checker.m.named(good["mode"])]
        yield "another mode", form, copy_of(set_(("mode",), lambda x: other[0]))
    if "joints" in good["to"]:
        yield "another shaft", 2, copy_of(set_(("to", "joints", 0), lambda x: x + 1e-2))
