#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""The same input gives the same bytes for any number of threads and any order of the design rows; another order, other ids and other
units give the same numbers to 1e-9."""
import os
import random
import re
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), 'lib'))
from case import DESIGN, ENGINES, Case, crosshole, levelling, read_csv
from tap import add, equal, near, run


def written(case, out):
    """All files of a run; in the summary the command and the timings aside, in the report too."""
    files = {}
    for name in sorted(os.listdir(out)):
        data = case.file(name, out)
        if name == 'summary.json':
            data = re.sub(rb'"command": ".*"|"seconds": \{[^}]*\}', b'', data)
        if name == 'report.html':
            data = re.sub(rb'leastwise (solve|sweep|probe) [^<"]*', b'COMMAND', data)
            data = re.sub(rb'"seconds": ?\{[^}]*\}', b'', data)
        files[name] = data
    return files


def compare(a, b, what):
    equal(sorted(a), sorted(b), what)
    for name in a:
        if a[name] != b[name]:
            lines = [(k, x, y) for k, (x, y) in enumerate(zip(a[name].split(b'\n'), b[name].split(b'\n')), 1) if x != y]
            raise AssertionError(f'{what}: {name} differs in {len(lines)} lines; first {lines[:1]}'[:800])


def threads(make, command, words):
    case = Case()
    make(case)
    first = None
    for count in ('1', '2', '3', '4'):
        out = os.path.join(case.folder, 'threads' + count)
        case.must(command, *words, '--threads', count, '--quiet', out=out, codes=(0, 1))
        files = written(case, out)
        first = first or files
        compare(first, files, f'{count} threads')


def shuffled(make, command, words):
    case = Case()
    rows = make(case)
    case.must(command, *words, '--quiet', codes=(0, 1))
    first = written(case, case.out)
    random.Random(5).shuffle(rows)
    case.table('design.csv', DESIGN, rows)
    out = os.path.join(case.folder, 'shuffled')
    case.must(command, *words, '--quiet', out=out, codes=(0, 1))
    files = written(case, out)
    for name in ('summary.json', 'report.html'):  # the digest of the design is another
        first.pop(name), files.pop(name)
    compare(first, files, 'shuffled')


def rays(case):
    return crosshole(case, 12, 12, 20)


def many_rays(case):
    return crosshole(case, 30, 30, 40)


def net(case):
    return levelling(case, 30, 30)


def small_net(case):
    return levelling(case, 9, 9)


PLANS = [(f'{engine}, damped', many_rays if engine in ('lsqr', 'cgls', 'lsmr') else rays, 'solve', ['--engine', engine, '--damping', '5'])
         for engine in ENGINES]
PLANS += [(f'{engine}, a network', small_net if engine == 'dense' else net, 'solve', ['--engine', engine]) for engine in ('dense', 'cholesky', 'qr')]
PLANS += [('sweep, dense', rays, 'sweep', ['--engine', 'dense', '--dampings', '0.1:50:9']),
          ('sweep, lsqr', many_rays, 'sweep', ['--engine', 'lsqr', '--dampings', '3:50:9']),
          ('sweep, flattest', many_rays, 'sweep', ['--engine', 'lsqr', '--dampings', '3:50:5', '--prefer', 'flattest']),
          ('smoothest, cholesky', many_rays, 'solve', ['--engine', 'cholesky', '--damping', '5', '--prefer', 'smoothest', '--also-smallest', '0.1']),
          ('single storage', many_rays, 'solve', ['--engine', 'lsqr', '--damping', '5', '--storage', 'single']),
          ('huber', net, 'solve', ['--misfit', 'huber']),
          ('l1', lambda case: levelling(case, 8, 8), 'solve', ['--misfit', 'l1']),
          ('outliers', lambda case: levelling(case, 8, 8), 'solve', ['--search-outliers', '--alpha', '0.05']),
          ('probe', rays, 'probe', ['--damping', '5', '--trials', '6'])]
for plan, make, command, words in PLANS:
    add(f'threads: {plan}', threads, make, command, words)
for plan, make, command, words in PLANS:
    add(f'shuffled rows: {plan}', shuffled, make, command, words)


def estimates(case, unname=lambda s: s, out=None, factor=1.0):
    P = {unname(k): [float(r['estimate']) * factor, float(r['sigma'] or 'nan') * factor] for k, r in case.parameters(out).items()}
    R = {unname(k): [float(r[c]) if r[c] else 0.0 for c in ('predicted', 'residual', 'redundancy', 'standardized')] for k, r in case.residuals(out).items()}
    return P, R


def agree(a, b, scales=(1e-9, 1e-9)):
    for part in (0, 1):
        equal(sorted(a[part]), sorted(b[part]))
        columns = len(next(iter(a[part].values())))
        for c in range(columns):
            size = max(abs(v[c]) for v in a[part].values() if v[c] == v[c])
            for key in a[part]:
                x, y = a[part][key][c], b[part][key][c]
                if x != x and y != y:
                    continue
                near(y, x, 0, scales[part] * size, f'{key}, column {c}')


def reordered(make, words):
    case = Case()
    rows = make(case)
    case.must('solve', *words, codes=(0, 1))
    first = estimates(case)
    other = Case()
    other.table('design.csv', DESIGN, rows)
    for name in ('observations.csv', 'parameters.csv'):
        table = read_csv(case.path(name))
        random.Random(9).shuffle(table)
        other.table(name, list(table[0]), [list(r.values()) for r in table])
    other.must('solve', *words, codes=(0, 1))
    agree(first, estimates(other))


def renamed(make, words):
    case = Case()
    rows = make(case)
    case.must('solve', *words, codes=(0, 1))
    first = estimates(case)
    other = Case()
    new = lambda s: f'Z{hash_of(s)}~{s}'
    other.table('design.csv', DESIGN, [[new(a), new(b), v] for a, b, v in rows])
    for name in ('observations.csv', 'parameters.csv'):
        table = read_csv(case.path(name))
        other.table(name, list(table[0]), [[new(list(r.values())[0]), *list(r.values())[1:]] for r in table])
    other.must('solve', *words, codes=(0, 1))
    agree(first, estimates(other, unname=lambda s: s.split('~')[1]))


def hash_of(text):
    value = 7
    for c in text:
        value = (value * 31 + ord(c)) % 10007
    return value


def other_units(make, words, factor):
    """Readings and their sigmas in another unit, and parameters in another: coefficients turn accordingly."""
    case = Case()
    rows = make(case)
    case.must('solve', *words, codes=(0, 1))
    P, R = estimates(case)
    other = Case()
    other.table('design.csv', DESIGN, [[a, b, v * 1000 / factor] for a, b, v in rows])
    table = read_csv(case.path('observations.csv'))
    other.table('observations.csv', list(table[0]), [[r['observation'], float(r['value']) * 1000, float(r['sigma']) * 1000] for r in table])
    table = read_csv(case.path('parameters.csv'))
    scaled = [[v if k not in ('prior', 'fixed') or not v else float(v) * factor for k, v in r.items()] for r in table]
    other.table('parameters.csv', list(table[0]), scaled)
    damped = [w if w != '5' else repr(5 / factor) for w in words]
    other.must('solve', *damped, codes=(0, 1))
    p, r = estimates(other)
    p = {k: [v / factor for v in values] for k, values in p.items()}
    r = {k: [values[0] / 1000, values[1] / 1000, *values[2:]] for k, values in r.items()}
    agree((P, R), (p, r))


for engine in ENGINES:
    iterative = engine in ('lsqr', 'cgls', 'lsmr')
    words = ['--engine', engine, '--damping', '5'] + (['--tolerance', '1e-12'] if iterative else [])
    add(f'another order of observations and parameters: {engine}', reordered, rays, words)
    add(f'other ids: {engine}', renamed, rays, words)
    add(f'other units: {engine}', other_units, rays, words, 1024)
    add(f'other units that are no power of two: {engine}', other_units, rays, words, 0.3048)
    if not iterative:
        words = ['--engine', engine]
        add(f'a network in another order: {engine}', reordered, small_net if engine == 'dense' else net, words)
        add(f'a network in other units: {engine}', other_units, small_net if engine == 'dense' else net, words, 0.001)


run()
