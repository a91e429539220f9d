#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""NIST StRD linear regression: every coefficient and standard deviation is the exact value rounded to double."""
import os
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), '..', 'command', 'lib'))
from case import DESIGN, REFERENCE, Case, read_csv
from tap import add, equal, near, run

FOLDER = os.path.join(REFERENCE, 'nist-strd')
POWERS = {'Filip': range(11), 'Longley': None, 'NoInt1': [1], 'NoInt2': [1], 'Norris': range(2), 'Pontius': range(3),
          **{f'Wampler{i}': range(6) for i in range(1, 6)}}


def power(text, p):
    """The p-th power of a decimal, as a decimal, with every digit."""
    if p == 0:
        return '1'
    negative, text = text.startswith('-'), text.lstrip('+-')
    whole, _, part = text.partition('.')
    digits, places = str(int((whole or '0') + part) ** p), len(part) * p
    digits = digits.rjust(places + 1, '0')
    return ('-' if negative and p % 2 else '') + (digits[:-places] + '.' + digits[-places:] if places else digits)


def problem(name):
    case, design, observations = Case(), [], []
    for i, row in enumerate(read_csv(os.path.join(FOLDER, name + '.csv'))):
        observations.append((f'y{i}', row['y']))
        if name == 'Longley':
            values = [('B0', '1')] + [(f'B{k}', row[f'x{k}']) for k in range(1, 7)]
        else:
            values = [(f'B{p}', power(row['x'], p)) for p in POWERS[name]]
        design += [(f'y{i}', parameter, value) for parameter, value in values]
    case.table('design.csv', DESIGN, design)
    case.table('observations.csv', ('observation', 'value'), observations)
    return case


def correctly_rounded(name, engine):
    case = problem(name)
    case.must('solve', '--engine', engine, '--variance', 'estimated')
    found = case.parameters()
    for row in read_csv(os.path.join(FOLDER, name + '.certified.csv')):
        for column, exact, certified in (('estimate', 'exact_estimate', 'estimate'), ('sigma', 'exact_standard_deviation', 'standard_deviation')):
            value = float(found[row['parameter']][column])
            near(value, row[certified], 10 ** -14.3, 1e-12 if float(row[certified]) == 0 else 0, f'{row["parameter"]} {column}')
            if float(row[exact]) != 0:
                equal(value, float(row[exact]), f'{row["parameter"]} {column}')


def statistics(name):
    case = problem(name)
    case.must('solve')
    stated = {r['statistic']: float(r['value']) for r in read_csv(os.path.join(FOLDER, name + '.statistics.csv'))}
    summary = case.summary()
    equal(summary['sizes']['degrees_of_freedom'], stated['degrees_of_freedom'])
    near(summary['fit']['chi_square'], stated['residual_sum_of_squares'], 1e-13, 1e-20)
    near(summary['fit']['variance_factor'], stated['residual_standard_deviation'] ** 2, 1e-13, 1e-20)


for name in POWERS:
    add(f'{name}: correctly rounded, dense', correctly_rounded, name, 'dense')
for name in ('Longley', 'Norris', 'Pontius', 'NoInt1', 'NoInt2', 'Wampler1', 'Wampler2', 'Wampler3', 'Wampler4', 'Wampler5', 'Filip'):
    add(f'{name}: correctly rounded, the engine that auto takes', correctly_rounded, name, 'auto')
    add(f'{name}: sum of squares and degrees of freedom', statistics, name)
run()
