#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""inspect: what it says of a sound problem, of a defective one and of a faulty one."""
import os
import re
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), 'lib'))
from case import DEMO, Case, crosshole, levelling, small
from tap import equal, matches, run, test


def facts(text):
    return {k.strip(): v.strip() for k, v in re.findall(r'^  (\S[^0-9]*?)  +(.*)$', text, re.M)}


@test('a sound problem: sizes, rank, condition, the engine that would be taken; nothing is written')
def _():
    case = Case(**small())
    done = case.run('inspect')
    equal((done.returncode, done.stderr), (0, ''))
    said = facts(done.stdout)
    for key, value in (('observations', '4'), ('parameters', '2'), ('nonzeros', '5'), ('degrees of freedom', '2'), ('rank', '2'), ('datum defect', '0')):
        equal(said.get(key), value, key)
    matches(done.stdout, 'condition of scaled matrix +about')
    matches(done.stdout, 'auto would take dense')
    equal(case.left(), [])
    equal(sorted(os.listdir(case.problem)), ['design.csv', 'observations.csv'])


@test('a datum defect is counted, named and cured in words; exit 0')
def _():
    case = Case()
    levelling(case, 4, 3)
    case.table('parameters.csv', ('parameter',), [(f'p{j}',) for j in range(12)])
    done = case.run('inspect')
    equal(done.returncode, 0, done.stderr)
    said = facts(done.stdout)
    equal((said['rank'], said['datum defect']), ('11', '1'))
    matches(done.stdout, 'defect 1: 12 parameters move together: p0')
    matches(done.stdout, '--datum free')


@test('a faulty problem: what can be said is said, all faults told, exit 3')
def _():
    case = Case(design=small()['design'] + 'zz,x,1\n', observations=small()['observations'].replace('d,2.2', 'd,two'))
    done = case.run('inspect')
    equal(done.returncode, 3)
    matches(done.stderr, r'observations\.csv:5:3: ')
    said = facts(done.stdout)
    equal(said['observations'], '4')
    equal(said['parameters'], '2')
    equal(case.left(), [])
    for lacking in ('design', 'observations'):
        case = Case(**small())
        os.remove(case.path(lacking + '.csv'))
        done = case.run('inspect')
        equal(done.returncode, 3, lacking)
        matches(done.stdout, 'Problem ', lacking)


@test('connected components, weak parameters, unreached and proportional columns, repeated equations')
def _():
    case = Case(design='observation,parameter,coefficient\na,x,1\nb,x,1\nc,y,1\nd,y,2\nd,z,4\nc,z,2\ne,w,1\n',
                observations='observation,value\na,1\nb,1\nc,1\nd,2\ne,3\n', parameters='parameter\nx\ny\nz\nw\nnobody\n')
    done = case.run('inspect')
    assert done.returncode in (0, 4), done.returncode
    text = done.stdout
    equal(facts(text)['connected components'], '4')
    matches(text, r'no equation, prior or penalty reaches \(1\): nobody')
    matches(text, r'touched by one observation only \(1\): w')
    matches(text, r'proportional columns.*y and z')
    matches(text, r'same equation \(\d\):.*a and b')
    matches(text, r'same equation \(\d\):.*c and d')


@test('the demo: every problem is sound')
def _():
    for name in ('crest-2025', 'crest-2026', 'plane'):
        case = Case().copy_of(os.path.join(DEMO, name))
        done = case.run('inspect')
        equal((done.returncode, done.stderr), (0, ''), name)
        equal(facts(done.stdout)['datum defect'], '0', name)
    case = Case().copy_of(os.path.join(DEMO, 'cross-hole'))
    equal(case.run('inspect').returncode, 0)


@test('units mixed up are pointed at')
def _():
    case = Case(design=small()['design'], observations='observation,value,sigma\na,1,0.1\nb,3,0.1\nc,2100,100\nd,2.2,0.00001\n')
    done = case.run('inspect')
    equal(done.returncode, 0)
    matches(done.stdout, '(?m)^! .*sigma')


@test('an iterative engine tells no rank and says so')
def _():
    case = Case()
    crosshole(case, 6, 6, 8)
    done = case.run('inspect', '--engine', 'lsqr')  # it only looks: nothing that an engine cannot do is asked for
    equal(done.returncode, 0, done.stderr)
    matches(done.stdout, 'rank +not determined')


run()
