#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""pack: a packed problem gives the same bytes; a damaged, cut, foreign or outdated pack is refused."""
import os
import random
import re
import shutil
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), 'lib'))
from case import DEMO, Case, crosshole, leastwise, levelling, small
from tap import add, equal, matches, run, test

RICH = {'design': 'observation,parameter,coefficient\na,x,1\nb,x,0.1\nb,y,1\nc,y,1\nd,x,2\nd,z,1e-3\ne,z,1\n',
        'observations': 'observation,value,sigma,group,day\na,1,0.1,g,mon\nb,3,0.1,g,"tue, late"\nc,2.1,0.1,h,\nd,2.2,0.2,h,wed\ne,1,0.5,h,thu\n',
        'parameters': 'parameter,prior,prior_sigma,lower,upper,damp_weight,point,axis,region,x,note\n'
                      'x,0.9,,,,1,P,east,r,0,first\ny,2,0.5,,,2,P,north,r,1,\nz,0,,,,1,,,s,2,"q ""q"""\n',
        'covariance': 'observation_a,observation_b,covariance\na,b,0.001\n',
        'penalty': 'row,parameter,coefficient\n1,x,1\n1,y,-1\n2,z,1\n',
        'conditions': 'condition,parameter,coefficient,value\nsum,x,1,3.3\nsum,y,1,\n'}


def pack(case):
    folder = os.path.join(case.folder, 'packed')
    case.must('pack', out=folder)
    return folder


def pack_file(folder):
    names = os.listdir(folder)
    equal(len(names), 1, 'files of a pack')
    return os.path.join(folder, names[0])


def same_bytes(make, command, words):
    case = Case()
    make(case)
    folder = pack(case)
    case.must(command, *words, codes=(0, 1))
    out = os.path.join(case.folder, 'from-pack')
    done = leastwise(command, folder, *words, '--out', out)
    assert done.returncode in (0, 1), done.stderr
    equal(sorted(os.listdir(out)), sorted(os.listdir(case.out)))
    for name in os.listdir(out):
        a, b = case.file(name), case.file(name, out)
        if name == 'report.html':
            continue
        if name == 'summary.json':
            a, b = (re.sub(rb'"command": ".*"|"seconds": \{[^}]*\}', b'', t) for t in (a, b))
        equal(a, b, name)


def rich(case):
    for name, content in RICH.items():
        case.put(name + '.csv', content)


def demo(name):
    return lambda case: case.copy_of(os.path.join(DEMO, name))


def market(case):
    case.put('observations.csv', 'observation,value,sigma\n1,1,0.1\n2,3,0.1\n3,2.1,0.1\n4,2.2,0.2\n')
    case.put('design.mtx', '%%MatrixMarket matrix coordinate real general\n4 2 5\n1 1 1\n2 1 1\n2 2 1\n3 2 1\n4 1 2\n')


for name, make, command, words in (('every kind of file', rich, 'solve', ['--prefer', 'own', '--damping', '0.3']),
                                   ('every kind of file, undamped', rich, 'solve', []),
                                   ('levelling demo', demo('crest-2025'), 'solve', []), ('plane demo', demo('plane'), 'solve', []),
                                   ('a network, cholesky', lambda c: levelling(c, 20, 20), 'solve', ['--engine', 'cholesky']),
                                   ('rays, sweep', lambda c: crosshole(c, 10, 10, 12), 'sweep', ['--prefer', 'flattest']),
                                   ('rays, lsqr', lambda c: crosshole(c, 10, 10, 12), 'solve', ['--engine', 'lsqr', '--damping', '2']),
                                   ('Matrix Market', market, 'solve', [])):
    add(f'a pack gives the same bytes: {name}', same_bytes, make, command, words)


@test('inspect says the same of a pack')
def _():
    case = Case()
    rich(case)
    folder = pack(case)
    a, b = case.run('inspect'), leastwise('inspect', folder)
    equal((b.returncode, b.stdout.replace(folder, 'X')), (a.returncode, a.stdout.replace(case.problem, 'X')))


def refused(folder, words=''):
    out = folder + '-out'
    for command in ('inspect', 'solve'):
        done = leastwise(command, folder, *([] if command == 'inspect' else ['--out', out]))
        equal(done.returncode, 3, f'{command}: exit status ({done.stderr.strip()[:300]})')
        matches(done.stderr, 'expected', command)
        matches(done.stderr, words, command)
        assert not os.path.exists(out)


@test('a pack cut anywhere is refused')
def _():
    case = Case()
    rich(case)
    name = pack_file(pack(case))
    with open(name, 'rb') as file:
        data = file.read()
    places = sorted({0, 1, 7, 8, 16, len(data) - 1, *range(31, len(data), max(1, len(data) // 40))})
    for length in places:
        with open(name, 'wb') as file:
            file.write(data[:length])
        refused(os.path.dirname(name))
    with open(name, 'wb') as file:
        file.write(data + b'\0')
    refused(os.path.dirname(name))


@test('a pack with one wrong bit anywhere is refused')
def _():
    case = Case()
    rich(case)
    name = pack_file(pack(case))
    with open(name, 'rb') as file:
        data = file.read()
    chance = random.Random(3)
    for place in [*range(0, 64, 5), *(chance.randrange(len(data)) for _ in range(60))]:
        wrong = bytearray(data)
        wrong[place] ^= 1 << chance.randrange(8)
        with open(name, 'wb') as file:
            file.write(wrong)
        out = os.path.join(case.folder, 'out')
        done = leastwise('solve', os.path.dirname(name), '--out', out, '--overwrite')
        if done.returncode == 0:  # only padding between sections may change nothing
            equal(len(case.rows('parameters.csv', out)), 3, f'byte {place}')
        else:
            equal(done.returncode, 3, f'byte {place}: {done.stderr[:200]}')
            matches(done.stderr, 'expected', f'byte {place}')


@test('a foreign file under the name of a pack is refused')
def _():
    case = Case(**small())
    name = pack_file(pack(case))
    for content in (b'', b'observation,value\n', os.urandom(4096), b'\0' * 100000, b'\x7fELF' + b'\0' * 500):
        with open(name, 'wb') as file:
            file.write(content)
        refused(os.path.dirname(name))


@test('pack: an older pack is replaced only with --overwrite')
def _():
    case = Case(**small())
    folder = pack(case)
    with open(pack_file(folder), 'rb') as file:
        before = file.read()
    case.put('observations.csv', small()['observations'].replace('b,3', 'b,4'))
    done = case.run('pack', out=folder)
    equal(done.returncode, 2)
    matches(done.stderr, '--overwrite')
    with open(pack_file(folder), 'rb') as file:
        equal(file.read(), before)
    case.must('pack', '--overwrite', out=folder)
    with open(pack_file(folder), 'rb') as file:
        assert file.read() != before


@test('a pack is the same for any number of threads and needs nothing of the folder that it was made from')
def _():
    case = Case()
    crosshole(case, 8, 8, 10)
    contents = []
    for threads in ('1', '3'):
        folder = os.path.join(case.folder, 'packed' + threads)
        case.must('pack', '--threads', threads, out=folder)
        with open(pack_file(folder), 'rb') as file:
            contents.append(file.read())
    equal(contents[0], contents[1])
    shutil.rmtree(case.problem)
    done = leastwise('solve', folder, '--damping', '1', '--out', case.out)
    equal(done.returncode, 0, done.stderr)


run()
