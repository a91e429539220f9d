#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""probe: patterns, noise trials and what is refused."""
import os
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), 'lib'))
from case import DESIGN, Case, crosshole, small
from tap import equal, matches, near, run, test


def rays():
    case = Case()
    crosshole(case, 8, 8, 12)
    return case


def patterns(case, out=None):
    """Every file of the run that is a table with the parameters in it."""
    found = {}
    for name in os.listdir(out or case.out):
        if name.endswith('.csv') and name not in ('residuals.csv',):
            rows = case.rows(name, out)
            if rows and 'parameter' in rows[0]:
                found[name] = rows
    return found


@test('a probe writes what was put in and what came back, and a summary')
def _():
    case = rays()
    case.must('probe', '--damping', '1', '--engine', 'dense')
    tables = patterns(case)
    assert tables, os.listdir(case.out)
    for rows in tables.values():
        equal({r['parameter'] for r in rows}, {f'c{j}' for j in range(64)})
    assert case.summary()['leastwise'] and case.file('report.html')
    equal(case.summary()['damping']['value'], 1)


@test('the same seed gives the same bytes, another seed other noise')
def _():
    case = rays()
    outs = [os.path.join(case.folder, name) for name in ('a', 'b', 'c')]
    for out, seed in zip(outs, ('3', '3', '4')):
        case.must('probe', '--damping', '1', '--trials', '8', '--seed', seed, out=out)
    read = [{n: case.file(n, out) for n in os.listdir(out) if n.endswith('.csv')} for out in outs]
    equal(read[0], read[1])
    assert read[0] != read[2]


@test('a pattern that the data see fully and without penalty comes back whole')
def _():
    case = Case()
    case.table('design.csv', DESIGN, [(f'o{j}', f'p{j}', 2) for j in range(6)])
    case.table('observations.csv', ('observation', 'value', 'sigma'), [(f'o{j}', j, 0.1) for j in range(6)])
    with open(os.path.join(case.folder, 'pattern.csv'), 'w') as file:
        file.write('parameter,value\np2,1.5\np4,-3\n')
    case.must('probe', '--pattern', os.path.join(case.folder, 'pattern.csv'), '--damping', '1e-7')
    for name, rows in patterns(case).items():
        texts = {r['parameter']: [float(v) for k, v in r.items() if k != 'parameter' and _number(v)] for r in rows}
        assert any(abs(v - 1.5) < 1e-6 for v in texts['p2']), (name, texts)
        assert any(abs(v + 3) < 1e-6 for v in texts['p4']), (name, texts)


def _number(text):
    try:
        float(text)
        return True
    except ValueError:
        return False


@test('refused: checkers without coordinates, a pattern of strangers, bootstrap without trials')
def _():
    case = Case(**small())
    done = case.run('probe', '--damping', '1')
    assert done.returncode in (2, 3), f'{done.returncode}: {done.stderr}'
    matches(done.stderr, 'x|coordinates')
    case = rays()
    with open(os.path.join(case.folder, 'pattern.csv'), 'w') as file:
        file.write('parameter,value\nc1,1\nnobody,2\n')
    done = case.run('probe', '--damping', '1', '--pattern', os.path.join(case.folder, 'pattern.csv'))
    equal(done.returncode, 3, done.stderr)
    matches(done.stderr, r'pattern\.csv:3:1: .*nobody')
    done = case.run('probe', '--damping', '1', '--pattern', os.path.join(case.folder, 'nowhere.csv'))
    equal(done.returncode, 3, done.stderr)
    done = case.run('probe', '--damping', '1', '--bootstrap')
    equal(done.returncode, 2, done.stderr)
    equal([n for n in case.left() if n != 'pattern.csv'], [])


run()
