#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Every refusal of an input file: exit 3, the place of the fault to the column, nothing written."""
import os
import re
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), 'lib'))
from case import Case, leastwise, small
from tap import add, equal, matches, run, test

D, O = small()['design'], small()['observations']
P = 'parameter,prior,prior_sigma,lower,upper,fixed,damp_weight,datum,point,axis,x\nx,1,,,,,,,,,0\ny,2,,,,,,,,,1\n'
V = 'observation_a,observation_b,covariance\na,a,0.01\na,b,0.001\nb,b,0.01\n'
L = 'row,parameter,coefficient\n1,x,1\n1,y,-1\n'
C = 'condition,parameter,coefficient,value\nsum,x,1,3\nsum,y,1,\n'
M = '%%MatrixMarket matrix coordinate real general\n% rays\n4 2 5\n1 1 1\n2 1 1\n2 2 1\n3 2 1\n4 1 2\n'
OM = 'observation,value,sigma\n1,1,0.1\n2,3,0.1\n3,2.1,0.1\n4,2.2,0.2\n'


def refused(files, places, words=''):
    """places: (file, line, column) of every fault, in the order told."""
    case = Case()
    for name, content in files.items():
        case.put(name, content)
    for command in ('solve', 'inspect'):
        done = case.run(command)
        equal(done.returncode, 3, f'{command}: exit status ({done.stderr.strip()[:300]})')
        equal(case.left(), [], f'{command}: what is left beside the problem')
        lines = done.stderr.splitlines()
        found = [re.match(r'(.*):(\d+):(\d+): (.*)$', line) for line in lines]
        assert all(found), f'{command}: found {lines}, expected FILE:LINE:COLUMN: and a message on every line'
        equal([(os.path.basename(f[1]), int(f[2]), int(f[3])) for f in found], list(places), f'{command}: places; {lines}')
        assert all(os.path.dirname(f[1]) == case.problem for f in found), f'the path as it was given: {lines}'
        for f in found:
            matches(f[4], 'expected', 'the message')
        matches(done.stderr, words, 'the message')


def refuse(name, place, words='', **files):
    add(name, refused, {**{'design.csv': D, 'observations.csv': O}, **{k.replace('_', '.'): v for k, v in files.items()}},
        place if isinstance(place, list) else [place], words)


def design(name, content, line, column, words=''):
    refuse('design: ' + name, ('design.csv', line, column), words, design_csv=content)


def observations(name, content, line, column, words=''):
    refuse('observations: ' + name, ('observations.csv', line, column), words, observations_csv=content)


def parameters(name, content, line, column, words=''):
    refuse('parameters: ' + name, ('parameters.csv', line, column), words, parameters_csv=content)


def other(file, name, content, line, column, words=''):
    refuse(f'{file}: {name}', (file + '.csv', line, column), words, **{file + '_csv': content})


# what is no number, anywhere
for name, text in (('a word', 'one'), ('NaN', 'nan'), ('infinity', 'inf'), ('minus infinity', '-Infinity'), ('hexadecimal', '0x2'),
                   ('a number and a letter', '2m'), ('two numbers', '1 2'), ('beyond the range', '1e999'), ('a lone sign', '-'),
                   ('a lone point', '.'), ('an exponent without digits', '1e'), ('a thousands mark', "1'000"),
                   ('an empty field', ''), ('a typographic minus', '\u22122'), ('a Fortran exponent', '1d3')):
    design(f'coefficient is {name}', D.replace('c,y,1', f'c,y,{text}'), 5, 5)
    observations(f'value is {name}', O.replace('b,3', f'b,{text}'), 3, 3)
    observations(f'sigma is {name}', O.replace('2.1,0.1', f'2.1,{text}'), 4, 7)
    if text:
        for column, place in (('prior', 3), ('prior_sigma', 4), ('lower', 5), ('upper', 6), ('fixed', 7), ('damp_weight', 8), ('x', 12)):
            fields = ['x'] + [''] * 10
            fields[place - 2] = text
            parameters(f'{column} is {name}', P.replace('x,1,,,,,,,,,0', ','.join(fields)), 2, place)
    other('covariance', f'covariance is {name}', V.replace('a,b,0.001', f'a,b,{text}'), 3, 5)
    other('penalty', f'coefficient is {name}', L.replace('y,-1', f'y,{text}'), 3, 5)
    other('conditions', f'coefficient is {name}', C.replace('x,1,3', f'x,{text},3'), 2, 7)
    other('conditions', f'value is {name}', C.replace('x,1,3', f'x,1,{text}'), 2, 9)

observations('sigma is zero', O.replace('2.1,0.1', '2.1,0'), 4, 7, 'positive')
observations('sigma is negative', O.replace('2.1,0.1', '2.1,-0.1'), 4, 7, 'positive')
observations('sigma underflows to zero', O.replace('2.1,0.1', '2.1,1e-400'), 4, 7)
parameters('prior_sigma is zero', P.replace('x,1,', 'x,1,0'), 2, 5, 'positive')
parameters('prior_sigma is negative', P.replace('x,1,', 'x,1,-2'), 2, 5, 'positive')
parameters('damp_weight is negative', P.replace('x,1,,,,,', 'x,1,,,,,-1'), 2, 9)
parameters('lower above upper', P.replace('x,1,,,,', 'x,1,,2,1,'), 2, 8, 'lower')
parameters('datum is neither yes nor no', P.replace('x,1,,,,,,,', 'x,1,,,,,,maybe,'), 2, 10, 'yes or no')
parameters('axis is no axis', P.replace('x,1,,,,,,,,,', 'x,1,,,,,,,,sideways,'), 2, 12, 'east')
parameters('a parameter twice', P + 'x,1,,,,,,,,,0\n', 4, 1)
parameters('an empty id', P.replace('x,1,', ',1,'), 2, 1)
parameters('fixed and prior_sigma together', P.replace('x,1,,,,', 'x,1,2,,,3'), 2, 9)

# ids
design('an observation that the other file lacks', D + 'zz,x,1\n', 7, 1, "'zz'")
design('an empty observation', D.replace('c,y', ',y'), 5, 1)
design('an empty parameter', D.replace('c,y', 'c,'), 5, 3)
refuse('design: a parameter that the other file lacks', ('design.csv', 5, 3), "'q'", design_csv=D.replace('c,y', 'c,q') + 'c,y,1\n',
       parameters_csv=P)
observations('an observation with no equation', O + 'e,1,0.1\n', 6, 1, "'e'")
observations('a duplicate id', O + 'a,1,0.1\n', 6, 1, "'a'")
observations('an empty id', O.replace('c,2.1', ',2.1').replace('d,', 'c,'), 4, 1)
design('a repeated pair', D + 'b,y,5\n', 7, 1, 'repeated')
other('covariance', 'an observation that the other file lacks', V + 'a,q,0\n', 5, 3, "'q'")
other('covariance', 'a pair again, the other way round', V + 'b,a,0.001\n', 5, 1)
other('covariance', 'a diagonal that contradicts sigma', V.replace('a,a,0.01', 'a,a,0.04'), 2, 5)
other('penalty', 'a parameter that the problem lacks', L + '2,q,1\n', 4, 3, "'q'")
other('penalty', 'a pair again', L + '1,x,1\n', 4, 1)
other('penalty', 'an empty row id', L + ',x,1\n', 4, 1)
other('conditions', 'a parameter that the problem lacks', C + 'sum,q,1,\n', 4, 5, "'q'")
other('conditions', 'a second value that differs', C.replace('y,1,\n', 'y,1,4\n'), 3, 9)
other('conditions', 'a pair again', C + 'sum,x,1,\n', 4, 1)

# covariance blocks
other('covariance', 'a block that is not positive definite', V.replace('0.001', '0.011'), 2, 5, 'positive definite')
refuse('covariance: no sigma and no diagonal', ('observations.csv', 3, 5), 'variance',
       observations_csv=O.replace('b,3,0.1', 'b,3,'), covariance_csv='observation_a,observation_b,covariance\na,a,0.01\n')

# missing columns, empty files
for file, text, columns in (('design', D, ('observation', 'parameter', 'coefficient')), ('observations', O, ('observation', 'value')),
                            ('parameters', P, ('parameter',)), ('covariance', V, ('observation_a', 'observation_b', 'covariance')),
                            ('penalty', L, ('row', 'parameter', 'coefficient')),
                            ('conditions', C, ('condition', 'parameter', 'coefficient', 'value'))):
    head, rest = text.split('\n', 1)
    for column in columns:
        renamed = ','.join('else' if c == column else c for c in head.split(','))
        refuse(f'{file}: no column {column}', (file + '.csv', 1, 1), column, **{file + '_csv': renamed + '\n' + rest})
    refuse(f'{file}: empty', (file + '.csv', 1, 1), **{file + '_csv': ''})
    refuse(f'{file}: only comments', (file + '.csv', 2, 1), **{file + '_csv': '# nothing\n'})
    refuse(f'{file}: only a header', (file + '.csv', 2, 1), 'no row', **{file + '_csv': '# nothing below\n' + head + '\n'})
    first, second = text.split('\n')[1:3]
    cut = ','.join(second.split(',')[:-1])
    refuse(f'{file}: too few fields', (file + '.csv', 3, len(cut) + 1), 'field', **{file + '_csv': text.replace(second, cut, 1)})
    refuse(f'{file}: too many fields', (file + '.csv', 3, len(second) + 2), 'field',
           **{file + '_csv': text.replace('\n' + second + '\n', '\n' + second + ',9\n', 1)})
    last = text.rstrip('\n').split('\n')[-1]
    short = text[:-len(last) - 1] + last[:last.index(',')]
    refuse(f'{file}: cut in the last line', (file + '.csv', text.count('\n'), last.index(',') + 1), 'field', **{file + '_csv': short})
    refuse(f'{file}: a NUL byte', (file + '.csv', 2, 1), 'NUL', **{file + '_csv': text.replace('\n' + first, '\n\0' + first, 1)})
    refuse(f'{file}: an open quote', (file + '.csv', 2, 1), 'quote', **{file + '_csv': text.replace('\n' + first, '\n"' + first, 1)})
    refuse(f'{file}: a column twice', (file + '.csv', 1, len(head) + 2), 'once',
           **{file + '_csv': text.replace('\n', ',9\n').replace(head + ',9', head + ',' + head.split(',')[0], 1)})

observations('a decimal comma', O.replace('2.1,0.1', '2,1,0.1'), 4, 7, 'field')
observations('a quote inside a field', O.replace('c,2.1', 'c"x,2.1'), 4, 1, 'quote')
observations('a column named like an output column', O.replace('sigma', 'sigma,residual').replace('0.1\n', '0.1,5\n').replace('0.2\n', '0.2,5\n'), 1, 25, 'residual')
parameters('a column named like an output column', 'parameter,estimate\nx,1\ny,2\n', 1, 11, 'estimate')
design('a fault behind comments, quotes and a mark', '\ufeff# a\n#b\n' + D.replace('c,y,1', '"c","y",one'), 7, 9)
design('a fault behind a field of several lines', D.replace('a,x,1\nb,x,1', '"a","x",1\nb,x,uno'), 3, 5)
observations('a fault with carriage returns', O.replace('b,3', 'b,drei').replace('\n', '\r\n'), 3, 3)


# Matrix Market
def market(name, content, line, column, words=''):
    add('design.mtx: ' + name, refused, {'design.mtx': content, 'observations.csv': OM}, [('design.mtx', line, column)], words)


market('no banner', M.replace('%%MatrixMarket', '%MatrixMarket'), 1, 1)
market('an unknown kind', M.replace('coordinate', 'array'), 1, 23)
market('complex values', M.replace('real', 'complex'), 1, 34)
market('a size that is no number', M.replace('4 2 5', '4 two 5'), 3, 3)
market('a value that is no number', M.replace('3 2 1', '3 2 one'), 7, 5)
market('NaN', M.replace('3 2 1', '3 2 nan'), 7, 5)
market('a number and a letter', M.replace('3 2 1', '3 2 1m'), 7, 5)
market('a row beyond the size', M.replace('3 2 1', '5 2 1'), 7, 1)
market('a row zero', M.replace('3 2 1', '0 2 1'), 7, 1)
market('a column beyond the size', M.replace('3 2 1', '3 3 1'), 7, 3)
market('fewer entries than stated', M.replace('4 1 2\n', ''), 8, 1)
market('more entries than stated', M + '1 2 1\n', 9, 1)
market('a field too many', M.replace('3 2 1', '3 2 1 7'), 7, 7)
market('a field too few', M.replace('3 2 1', '3 2'), 7, 4)
market('a pair again', M.replace('4 2 5', '4 2 6') + '1 1 1\n', 9, 1, 'repeated')
market('empty', '', 1, 1)
market('a NUL byte', M.replace('3 2 1', '3 \0 1'), 7, 3)
add('design.mtx: an observation that the other file lacks', refused,
    {'design.mtx': M, 'observations.csv': OM.replace('4,2.2', 'x,2.2')}, [('design.mtx', 8, 1)], "'?4'?")
add('design.mtx: another number of rows than observations', refused,
    {'design.mtx': M.replace('4 2 5', '5 2 6') + '5 1 1\n', 'observations.csv': OM}, [('design.mtx', 3, 1)], '5 rows')
add('design.mtx: an observation with no equation', refused,
    {'design.mtx': M.replace('4 2 5', '4 2 4').replace('3 2 1\n', ''), 'observations.csv': OM}, [('observations.csv', 4, 1)], "'3'")
add('design.mtx: beside design.csv', refused, {'design.mtx': M, 'design.csv': D, 'observations.csv': O}, [('design.mtx', 1, 1)])

# absent files
add('no design', refused, {'observations.csv': O}, [('design.csv', 1, 1)], 'no such file')
add('no observations', refused, {'design.csv': D}, [('observations.csv', 1, 1)], 'no such file')


@test('a problem folder that is not there')
def _():
    case = Case()
    done = leastwise('solve', case.folder + '/nowhere', '--out', case.out)
    equal(done.returncode, 3, 'exit status')
    matches(done.stderr, 'nowhere.*expected a problem folder')
    equal(case.left(), [])


@test('a named file that is not there')
def _():
    for option in ('design', 'observations', 'parameters', 'covariance', 'penalty', 'conditions'):
        case = Case(**small())
        done = case.run('solve', f'--{option}', case.folder + '/nowhere.csv')
        equal(done.returncode, 3, option)
        matches(done.stderr, r'nowhere\.csv:1:1: ', option)
        equal(case.left(), [])


@test('all faults of a file at once, at most 20 of them')
def _():
    case = Case()
    case.put('observations.csv', 'observation,value\n' + ''.join(f'o{i},bad\n' for i in range(30)))
    case.put('design.csv', 'observation,parameter,coefficient\n' + ''.join(f'o{i},x,1\n' for i in range(30)))
    done = case.run('solve')
    equal(done.returncode, 3)
    places = re.findall(r'observations\.csv:(\d+):(\d+):', done.stderr)
    equal(places, [(str(i + 2), str(len(f'o{i},') + 1)) for i in range(20)], 'places')


@test('faults of several files and of several kinds, together and in order')
def _():
    case = Case(design=D.replace('a,x,1', 'a,x,one').replace('c,y,1', 'c,y'), observations=O.replace('b,3,0.1', 'b,,-1').replace('d,2.2', 'd,nan'))
    done = case.run('solve')
    equal(done.returncode, 3)
    equal(re.findall(r'(\w+)\.csv:(\d+):(\d+):', done.stderr),
          [('observations', '3', '3'), ('observations', '3', '4'), ('observations', '5', '3'), ('design', '2', '5'), ('design', '5', '4')])


@test('a message shows what was found, escaped and cut')
def _():
    case = Case(design=D.replace('c,y,1', 'c,y,' + 'w' * 500), observations=O)
    done = case.run('solve')
    equal(done.returncode, 3)
    assert len(done.stderr) < 600, done.stderr
    case.put('design.csv', D.replace('c,y,1', 'c,y,\x1b[31mred'))
    done = case.run('solve')
    equal(done.returncode, 3)
    assert '\x1b' not in done.stderr, repr(done.stderr)


@test('all commands refuse')
def _():
    for command in ('solve', 'sweep', 'probe', 'pack', 'inspect'):
        case = Case(design=D.replace('a,x,1', 'a,x,one'), observations=O)
        done = case.run(command)
        equal(done.returncode, 3, command)
        matches(done.stderr, r'design\.csv:2:5: ', command)
        equal(case.left(), [], command)


run()
