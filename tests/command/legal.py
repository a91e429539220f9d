#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Odd but legal input gives the same numbers; columns that the program does not know are carried through."""
import os
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), 'lib'))
from case import Case, small
from tap import add, equal, matches, near, run, test

D, O = small()['design'], small()['observations']
P = 'parameter,prior\nx,1\ny,2\n'
V = 'observation_a,observation_b,covariance\na,b,0.001\n'
L = 'row,parameter,coefficient\n1,x,1\n1,y,-1\n'
C = 'condition,parameter,coefficient,value\nsum,x,1,3.01\nsum,y,1,\n'
FILES = {'design': D, 'observations': O, 'parameters': P, 'covariance': V, 'penalty': L, 'conditions': C}
OPTIONS = ('--prefer', 'own', '--damping', '0.5')


def columns_turned(text):
    return '\n'.join(','.join(reversed(line.split(','))) for line in text.rstrip('\n').split('\n')) + '\n'


def quoted(text):
    return '\n'.join(','.join(f'"{field}"' for field in line.split(',')) for line in text.rstrip('\n').split('\n')) + '\n'


ODD = {'carriage returns': lambda t: t.replace('\n', '\r\n'),
       'a byte-order mark': lambda t: '\ufeff' + t,
       'a byte-order mark and carriage returns': lambda t: '\ufeff' + t.replace('\n', '\r\n'),
       'quotes around everything': quoted,
       'comments before the header': lambda t: '# made by hand\n#\n# "odd, or not\n' + t,
       'another order of columns': columns_turned,
       'no final newline': lambda t: t[:-1],
       'blank lines at the end': lambda t: t + '\n\n',
       'blank lines inside': lambda t: t.replace('\n', '\n\n'),
       'blanks around fields': lambda t: t.replace(',', ' , ')}


def numbers(case):
    return ([(r['parameter'], r['estimate'], r['sigma']) for r in case.rows('parameters.csv')],
            [(r['observation'], r['predicted'], r['residual']) for r in case.rows('residuals.csv')])


base = Case(**FILES)
base.must('solve', *OPTIONS)


def same(file, change):
    case = Case(**{**FILES, file: change(FILES[file])})
    case.must('solve', *OPTIONS)
    equal(numbers(case), numbers(base), file)


for name, change in ODD.items():
    for file in FILES:
        add(f'{file}.csv with {name}', same, file, change)


@test('numbers in all their spellings')
def _():
    case = Case(**{**FILES, 'observations': 'observation,value,sigma\na,+1.0,1e-1\nb,3.,.1\nc,21E-1,0.10\nd,0.22e+01,2.0e-1\n'})
    case.must('solve', *OPTIONS)
    equal([r[1:] for r in numbers(case)[0]], [r[1:] for r in numbers(base)[0]])


@test('ids with commas, quotes, blanks, other scripts and markup')
def _():
    ids = ['say ""x""', 'a, b', 'Höhe Ω', "<b>&'", '-1', '=1+2']
    design = 'observation,parameter,coefficient\n' + ''.join(f'"{i}","{i}",1\n' for i in ids)
    case = Case(design=design, observations='observation,value,sigma\n' + ''.join(f'"{i}",{k},1\n' for k, i in enumerate(ids)))
    case.must('solve')
    plain = [i.replace('""', '"') for i in ids]
    equal([r['parameter'] for r in case.rows('parameters.csv')], plain)
    equal([r['observation'] for r in case.rows('residuals.csv')], plain)
    report = case.file('report.html').decode()
    assert '<b>&' not in report, 'an id stands unescaped in the report'
    case.must('solve', '--overwrite', '--resolution-of', 'Höhe Ω')


@test('unknown columns are carried through to the row of the same id')
def _():
    case = Case(design=D, parameters='note,parameter,colour\n"a, ""b""",y,red\n,x,\n',
                observations='day,observation,value,sigma,crew\nmon,a,1,0.1,\ntue,b,3,0.1,"x,y"\nwed,c,2.1,0.1,z\n"line\nbreak",d,2.2,0.2,w\n')
    case.must('solve')
    equal([(r['parameter'], r['note'], r['colour']) for r in case.rows('parameters.csv')], [('y', 'a, "b"', 'red'), ('x', '', '')])
    equal([(r['observation'], r['day'], r['crew']) for r in case.rows('residuals.csv')],
          [('a', 'mon', ''), ('b', 'tue', 'x,y'), ('c', 'wed', 'z'), ('d', 'line\nbreak', 'w')])


@test('rows keep the order of the input')
def _():
    case = Case(design=D, observations='observation,value,sigma\nd,2.2,0.2\nb,3,0.1\na,1,0.1\nc,2.1,0.1\n', parameters='parameter\ny\nx\n')
    case.must('solve')
    equal([r['observation'] for r in case.rows('residuals.csv')], list('dbac'))
    equal([r['parameter'] for r in case.rows('parameters.csv')], list('yx'))


@test('without parameters.csv the order of first appearance in the design')
def _():
    case = Case(design='observation,parameter,coefficient\nb,y,1\na,x,1\nb,x,1\nc,y,1\nd,x,2\n', observations=O)
    case.must('solve')
    equal([r['parameter'] for r in case.rows('parameters.csv')], list('yx'))


@test('a Matrix Market design gives the numbers of the CSV design, ids being the numbers')
def _():
    case = Case(observations='observation,value,sigma\n1,1,0.1\n2,3,0.1\n3,2.1,0.1\n4,2.2,0.2\n')
    case.put('design.mtx', '%%MatrixMarket matrix coordinate real general\n% rays\n4 2 5\n1 1 1\n2 1 1\n2 2 1\n3 2 1\n4 1 2\n')
    case.must('solve')
    plain = Case(**small())
    plain.must('solve')
    equal([(r['estimate'], r['sigma']) for r in case.rows('parameters.csv')], [(r['estimate'], r['sigma']) for r in plain.rows('parameters.csv')])
    equal([r['parameter'] for r in case.rows('parameters.csv')], ['1', '2'])


@test('files named elsewhere')
def _():
    case = Case(**FILES)
    words = []
    for file in FILES:
        os.rename(case.path(file + '.csv'), os.path.join(case.folder, file + '-2.csv'))
        words += [f'--{file}', os.path.join(case.folder, file + '-2.csv')]
    case.must('solve', *OPTIONS, *words)
    equal(numbers(case), numbers(base))


@test('--repeated add sums repeated pairs')
def _():
    case = Case(design=D.replace('d,x,2', 'd,x,0.75\nd,x,1.25'), observations=O)
    equal(case.run('solve').returncode, 3)
    case.must('solve', '--repeated', 'add')
    plain = Case(**small())
    plain.must('solve')
    equal(numbers(case), numbers(plain))


@test('a coefficient of zero touches nothing')
def _():
    case = Case(design=D + 'a,y,0\n', observations=O)
    case.must('solve')
    plain = Case(**small())
    plain.must('solve')
    equal(numbers(case)[0], numbers(plain)[0])
    equal([r['hits'] for r in case.rows('parameters.csv')], ['3', '2'])


@test('a covariance file may give the variances alone, and a diagonal that agrees with sigma is accepted')
def _():
    plain = Case(**small())
    plain.must('solve')
    for covariance, observations in (('a,a,0.01\nb,b,0.01\nc,c,0.01\nd,d,0.04\n', O.replace(',0.1', ',').replace(',0.2', ',')),
                                     ('a,a,0.01\n', O)):
        case = Case(design=D, observations=observations, covariance='observation_a,observation_b,covariance\n' + covariance)
        case.must('solve')
        for a, b in zip(case.rows('parameters.csv'), plain.rows('parameters.csv')):
            near(a['estimate'], b['estimate'], 1e-14, what=a['parameter'])
            near(a['sigma'], b['sigma'], 1e-14, what=a['parameter'])
    case = Case(design=D, observations='observation,value\na,1\nb,3\nc,2.1\nd,2.2\n',
                covariance='observation_a,observation_b,covariance\na,a,0.01\nb,b,0.01\nc,c,0.01\nd,d,0.04\n')
    case.must('solve')
    equal(case.summary()['fit']['variance'], 'stated')
    near(case.parameters()['x']['estimate'], plain.parameters()['x']['estimate'], 1e-14)


@test('without sigma: unit weights and an estimated variance factor')
def _():
    case = Case(design=D, observations='observation,value\na,1\nb,3\nc,2.1\nd,2.2\n')
    case.must('solve')
    fit = case.summary()['fit']
    equal(fit['variance'], 'estimated')
    near(fit['variance_factor'], fit['chi_square'] / 2, 1e-15)
    case.must('solve', '--overwrite', '--variance', 'stated')
    equal(case.summary()['fit']['variance'], 'stated')


@test('a problem folder with a slash at its end, and the default run folder')
def _():
    case = Case(**small())
    from case import leastwise
    done = leastwise('solve', case.problem + '/')
    equal(done.returncode, 0, done.stderr)
    equal(case.left(), ['problem-solve'])
    matches(done.stdout, 'problem-solve')


run()
