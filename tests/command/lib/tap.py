# SPDX-License-Identifier: GPL-3.0-or-later
"""Tests that speak TAP: @test registers a function, run() runs them all; a failed assertion is a "not ok" line with its reason."""
import math
import re
import sys
import time
import traceback

_tests = []


class Skip(Exception):
    """Raised by a test that cannot run here; the text says why."""


def test(name):
    def keep(function):
        _tests.append((name, function))
        return function
    return keep


def add(name, function, *arguments):
    _tests.append((name, lambda: function(*arguments)))


def equal(found, expected, what=''):
    assert found == expected, f'{what}: found {found!r}, expected {expected!r}'


def near(found, expected, relative=0.0, absolute=0.0, what=''):
    """|found - expected| <= relative |expected| + absolute."""
    found, expected = float(found), float(expected)
    fine = math.isfinite(found) and abs(found - expected) <= relative * abs(expected) + absolute
    assert fine, f'{what}: found {found!r}, expected {expected!r} within {relative:g} relative, {absolute:g} absolute'


def matches(text, pattern, what=''):
    assert re.search(pattern, text), f'{what}: found {text[:400]!r}, expected /{pattern}/'


def run():
    failed = 0
    print(f'1..{len(_tests)}', flush=True)
    for number, (name, function) in enumerate(_tests, 1):
        name = name.replace('#', '')
        began = time.monotonic()
        try:
            function()
            print(f'ok {number} - {name}', flush=True)
        except Skip as why:
            print(f'ok {number} - {name} # SKIP {why}', flush=True)
        except Exception as error:  # a test that stops is a failed test
            failed += 1
            print(f'not ok {number} - {name}', flush=True)
            lines = [str(error)] if isinstance(error, AssertionError) and str(error) else traceback.format_exc().splitlines()
            for line in '\n'.join(lines).splitlines():
                print(f'# {line}', flush=True)
        if time.monotonic() - began > 5:
            print(f'# took {time.monotonic() - began:.1f} s', flush=True)
    sys.exit(0 if failed == 0 else 1)
