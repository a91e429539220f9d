# SPDX-License-Identifier: GPL-3.0-or-later
"""Networks, their certainty, dense problems and correct digits."""
import csv
import os
import shutil
import subprocess
from decimal import Decimal, getcontext

import numpy as np
from scipy.linalg import lapack

import generate
from measure import interleave, middle, spread

getcontext().prec = 80
POWERS = {'Filip': range(11), 'Pontius': range(3), 'NoInt1': [1], 'NoInt2': [1], 'Norris': range(2),
          **{f'Wampler{i}': range(6) for i in range(1, 6)}}


def network_file(place, dimension, unknowns, shuffled=False):
    name = f'network-{dimension}d-{unknowns}{"-shuffled" if shuffled else ""}.lwm'
    return place.make(name, generate.network, dimension, unknowns, shuffled)


def network(place, figures):
    cases = [(2, 2000, False, 5), (3, 2000, False, 5), (2, 20000, False, 7), (3, 20000, False, 7), (2, 20000, True, 7)]
    if not place.quick:
        cases += [(2, 200000, False, 3), (3, 200000, False, 3), (2, 1000000, False, 1)]
    for dimension, unknowns, shuffled, rounds in cases:
        path, tool = network_file(place, dimension, unknowns, shuffled), place.tool('network')
        contenders = {'ours': [tool, path, 'own'], 'CHOLMOD': [tool, path, 'cholmod'], 'SPQR': [tool, path, 'spqr']}
        if unknowns <= 200000:
            contenders['Octave'] = ['octave-cli', place.script('contender.m'), path]
        if unknowns <= 20000:
            contenders['SciPy spsolve'] = [place.script('contender.py'), 'spsolve', path]
        results = interleave(contenders, rounds)
        cpu = {name: middle(r, 'solve_cpu') for name, r in results.items()}
        noise = max(spread(r, 'solve_cpu') for r in results.values())
        case = f'{dimension}-D, n = {unknowns}{", shuffled" if shuffled else ""}'
        limits = {'CHOLMOD': 1.25, 'SPQR': 0.75, 'Octave': 0.5} if unknowns >= 20000 else {}
        for name in contenders:
            if name != 'ours':
                figures.add(f'network solve, refined / {name}', case, cpu['ours'], cpu[name], 's', cpu['ours'] / cpu[name],
                            limits.get(name), True, noise)
            if dimension == 2 and not shuffled:
                figures.curve('growth-unknowns', name, unknowns, cpu[name])


def certainty(place, figures):
    cases = [(20000, 0.8, 7)] if place.quick else [(20000, 0.8, 7), (200000, 1.1, 3), (1000000, 1.3, 1)]
    for unknowns, wanted, rounds in cases:
        path, tool = network_file(place, 2, unknowns), place.tool('network')
        results = interleave({'inverse': [tool, path, 'inverse'], 'ours': [tool, path, 'certain'], 'CHOLMOD': [tool, path, 'cholmod'],
                              'own': [tool, path, 'own']}, rounds)
        inverse, factor = middle(results['inverse'], 'inverse_cpu'), middle(results['inverse'], 'factorize_cpu')
        noise = max(spread(results['inverse'], 'inverse_cpu'), spread(results['inverse'], 'factorize_cpu'))
        case = f'2-D, n = {unknowns}'
        figures.add('selected inverse / supernodal factorization', case, inverse, factor, 's', inverse / factor, wanted, True, noise)
        whole = middle(results['CHOLMOD'], 'factorized_cpu')
        figures.add('selected inverse / bare CHOLMOD, from forming to the factor', case, inverse, whole, 's', inverse / whole, None, True, noise)
        ours, solve = middle(results['ours'], 'all_cpu'), middle(results['own'], 'solve_cpu')
        bare = middle(results['CHOLMOD'], 'solve_cpu')
        figures.add('solve, variances and redundancies / the bare solve', case, ours, solve, 's', ours / solve, 2.0, True, noise)
        figures.add('solve, variances and redundancies / bare CHOLMOD', case, ours, bare, 's', ours / bare)
        peak, theirs = middle(results['ours'], 'peak'), middle(results['CHOLMOD'], 'peak')
        figures.add('peak memory / bare CHOLMOD', case, peak / 1e6, theirs / 1e6, 'MB', peak / theirs, 2.0)
        figures.add('sum of redundancies - degrees of freedom, relative', case, abs(results['ours'][0]['sum_error']), None, '',
                    abs(results['ours'][0]['sum_error']), 1e-10)


def dense(place, figures):
    m, n = ('400', '100') if place.quick else ('2000', '500')
    tool = place.tool('dense')
    names = {'own': 'ours', 'lapack': 'LAPACK dgels', 'gsl': 'GSL multifit', 'own-sweep': 'ours', 'gsl-sweep': 'GSL svd'}
    results = interleave({f'{k}': [tool, m, n, k] for k in names}, 3 if place.quick else 5)
    cpu = {k: middle(r, 'solve_cpu') for k, r in results.items()}
    case = f'{m} x {n}, full'
    figures.add('dense solve, refined / LAPACK dgels unrefined', case, cpu['own'], cpu['lapack'], 's', cpu['own'] / cpu['lapack'])
    figures.add('dense solve, refined / GSL multifit', case, cpu['own'], cpu['gsl'], 's', cpu['own'] / cpu['gsl'])
    figures.add('dense sweep of 50 dampings / GSL svd and solves', case, cpu['own-sweep'], cpu['gsl-sweep'], 's',
                cpu['own-sweep'] / cpu['gsl-sweep'])


def digits(found, exact):
    """Correct digits of a number written as text; a certified zero asks for 1e-12."""
    found, exact = Decimal(found), Decimal(exact)
    if exact == 0:
        return 17.0 if abs(found) < Decimal('1e-12') else 0.0
    error = abs(found - exact) / abs(exact)
    return 17.0 if error < Decimal('1.2e-16') else max(0.0, float(-error.log10()))


def read_set(place, name):
    folder = os.path.join(place.source, 'tests', 'reference', 'nist-strd')
    with open(os.path.join(folder, f'{name}.csv')) as file:
        data = list(csv.reader(file))[1:]
    with open(os.path.join(folder, f'{name}.certified.csv')) as file:
        certified = list(csv.DictReader(file))
    if name == 'Longley':
        design = [[('B' + str(j), Decimal(v)) for j, v in enumerate(['1'] + row[1:])] for row in data]
    else:
        design = [[(f'B{p}', Decimal(row[1]) ** p if p else Decimal(1)) for p in POWERS[name]] for row in data]
    return [row[0] for row in data], design, certified


def by_program(place, value, design):
    folder = os.path.join(place.data, 'nist')
    shutil.rmtree(folder, ignore_errors=True)
    os.makedirs(folder)
    with open(os.path.join(folder, 'design.csv'), 'w') as file:
        file.write('observation,parameter,coefficient\n')
        file.writelines(f'y{i},{p},{c:f}\n' for i, row in enumerate(design) for p, c in row)
    with open(os.path.join(folder, 'observations.csv'), 'w') as file:
        file.write('observation,value\n')
        file.writelines(f'y{i},{v}\n' for i, v in enumerate(value))
    subprocess.run([place.program, 'solve', folder, '--engine', 'dense', '--variance', 'estimated', '--quiet', '--overwrite', '-o',
                    folder + '-solve'], check=True, stdout=subprocess.DEVNULL)
    with open(os.path.join(folder + '-solve', 'parameters.csv')) as file:
        return {row['parameter']: (row['estimate'], row['sigma']) for row in csv.DictReader(file)}


def by_dgels(value, design):
    A = np.array([[float(c) for _, c in row] for row in design])
    b = np.array([float(v) for v in value])
    m, n = A.shape
    factor, x, _ = lapack.dgels(A.copy(), b)
    inverse = np.linalg.inv(np.triu(factor[:n, :n]))
    x = x[:n]
    variance = np.sum((b - A @ x) ** 2) / (m - n)
    sigma = np.sqrt(variance * np.sum(inverse ** 2, axis=1))
    return {p: (repr(float(x[j])), repr(float(sigma[j]))) for j, (p, _) in enumerate(design[0])}


def nist(place, figures):
    lines = ['| set | dgels: estimates | dgels: standard deviations | Leastwise: estimates | Leastwise: standard deviations | correctly rounded |',
             '|---|---|---|---|---|---|']
    right = seen = 0
    for name in [*POWERS, 'Longley']:
        value, design, certified = read_set(place, name)
        ours, theirs = by_program(place, value, design), by_dgels(value, design)
        score = {(who, k): min(digits(answer[r['parameter']][k], r[exact]) for r in certified)
                 for who, answer in (('ours', ours), ('dgels', theirs))
                 for k, exact in ((0, 'exact_estimate'), (1, 'exact_standard_deviation'))}
        rounded = [float(ours[r['parameter']][k]) == float(r[exact]) or (float(r[exact]) == 0 and digits(ours[r['parameter']][k], 0) > 0)
                   for r in certified for k, exact in ((0, 'exact_estimate'), (1, 'exact_standard_deviation'))]
        right, seen = right + sum(rounded), seen + len(rounded)
        lines.append(f'| {name} | {score["dgels", 0]:.1f} | {score["dgels", 1]:.1f} | {score["ours", 0]:.1f} | {score["ours", 1]:.1f} | '
                     f'{sum(rounded)} of {len(rounded)} |')
        figures.add('correct digits, smallest (ours beside dgels)', name, score['ours', 0], score['dgels', 0], 'digits', score['ours', 0], 14.3, False)
    text = '\n'.join(lines)
    print(text)
    print(f'{right} of {seen} numbers are the exact value rounded to double')
    with open(os.path.join(place.data, 'accuracy.md'), 'w') as file:
        file.write(text + f'\n\n{right} of {seen} numbers are the exact value rounded to double (an exact zero: below 1e-12).\n')


SECTIONS = {'network': network, 'certainty': certainty, 'nist': nist, 'dense': dense}
