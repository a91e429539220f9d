#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Published and recomputed regularized, robust and bounded problems. Sources stand in each folder."""
import csv
import glob
import math
import os
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), '..', 'command', 'lib'))
from case import DESIGN, ENGINES, REFERENCE, Case, read_csv
from tap import add, equal, matches, near, run, test


def path(folder, name):
    return os.path.join(glob.glob(os.path.join(REFERENCE, folder + '-*'))[0], name)


def table(folder, name):
    return read_csv(path(folder, name))


def expected(folder, name='expected.csv'):
    return {r['quantity']: r['value'] for r in table(folder, name)}


def matrix(folder, name):
    with open(path(folder, name), newline='') as file:
        return list(csv.reader(file))[1:]


def dense_case(A, b, sigma=None, names=None):
    names = names or [f'x{j + 1}' for j in range(len(A[0]))]
    case = Case()
    case.table('design.csv', DESIGN, [(f'o{i}', names[j], v) for i, row in enumerate(A) for j, v in enumerate(row) if float(v) != 0])
    case.table('observations.csv', ('observation', 'value') + (('sigma',) if sigma else ()),
               [(f'o{i}', b[i]) + ((sigma[i],) if sigma else ()) for i in range(len(b))])
    return case


def tikhonov(folder, sigma=None):
    A, b = matrix(folder, 'A.csv'), [r[0] for r in matrix(folder, 'b.csv')]
    return dense_case(A, b, sigma), len(b)


def estimates(case):
    return [float(r['estimate']) for r in case.rows('parameters.csv')]


def choices(case):
    return {c['criterion']: c for c in case.summary()['choices']}


def lambda_table(folder, least, relative):
    """Every row of the lambda table at or above `least`."""
    case, _ = tikhonov(folder)
    rows = [r for r in table(folder, 'expected_lambda_table.csv') if float(r['lambda']) >= least]
    case.must('sweep', '--engine', 'dense', '--dampings', ','.join(r['lambda'] for r in rows), codes=(0, 1))
    found = {float(r['damping']): r for r in case.rows('tradeoff.csv')}
    for r in rows:
        f = found[float(r['lambda'])]
        for mine, theirs in (('misfit', 'residual_norm'), ('size', 'solution_norm'), ('effective_parameters', 'trace_resolution'), ('gcv', 'gcv')):
            near(f[mine], r[theirs], relative, what=f'{mine} at {r["lambda"]}')
        if relative < 1e-9:
            near(f['curvature'], r['signed_curvature'], 1e-6, 1e-7, f'curvature at {r["lambda"]}')


# the first problem is known to 2e-8 below 1e-7 of the largest singular value, to 1e-10 above; see its SOURCE.md
add('14: Hilbert 10 x 8, lambda table down to 1e-7', lambda_table, '14', 1e-7, 1e-9)
add('14: Hilbert 10 x 8, lambda table down to 1e-8', lambda_table, '14', 1e-8, 1e-7)
add('15: first-kind equation, lambda table', lambda_table, '15', 3e-7, 1e-8)
add('17: gravity profile, lambda table', lambda_table, '17', 0, 1e-9)


@test('14: no corner and no interior minimum of GCV: both are said')
def _():
    case, _ = tikhonov('14')
    case.must('sweep', '--engine', 'dense', '--dampings', '1e-9:1.72277707:121', codes=(0, 1))
    found = choices(case)
    assert found['gcv']['warning'], found
    assert found['corner']['damping'] is None or found['corner']['warning'], found


@test('14: the published solution at the corner of the manual')
def _():
    E = expected('14')
    case, _ = tikhonov('14')
    case.must('solve', '--engine', 'dense', '--damping', E['lcurve_curvature_maximum_1_lambda'])
    S = case.summary()
    near(math.sqrt(S['fit']['chi_square']), E['residual_norm_at_lcurve'], 1e-9)
    near(math.sqrt(sum(v * v for v in estimates(case))), E['solution_norm_at_lcurve'], 1e-8)
    near(S['damping']['effective_parameters'], E['trace_resolution_at_lcurve'], 1e-8)
    for v, r in zip(estimates(case), table('14', 'expected_solutions.csv')):
        near(v, r['lcurve'], 1e-8, what='x' + r['index'])


def choose(folder):
    E = expected(folder)
    m = int(E['n'])
    sigma = float(E['noise_norm_delta']) / math.sqrt(m)  # then the discrepancy target m is the noise norm of the case
    case, _ = tikhonov(folder, [repr(sigma)] * m)
    case.must('sweep', '--engine', 'dense', '--dampings', f'{1e-5 / sigma!r}:{1 / sigma!r}:161', codes=(0, 1))
    found = choices(case)
    for criterion, key in (('corner', 'lcurve_curvature_maximum_1_lambda'), ('gcv', 'gcv_local_minimum_1_lambda'),
                           ('discrepancy', 'discrepancy_lambda_factor_1')):
        near(found[criterion]['damping'] * sigma, E[key], 1e-4 if criterion != 'discrepancy' else 1e-7, what=criterion)
    out = os.path.join(case.folder, 'factor')
    case.must('solve', '--engine', 'dense', '--damping', 'discrepancy', '--noise-factor', '1.1', '--dampings', f'{1e-5 / sigma!r}:{1 / sigma!r}:161', out=out, codes=(0, 1))
    near(case.summary(out)['damping']['value'] * sigma, E['discrepancy_lambda_factor_1.1'], 1e-7)
    for key, column in (('lcurve_curvature_maximum_1_lambda', 'lcurve'), ('gcv_local_minimum_1_lambda', 'gcv'), ('discrepancy_lambda_factor_1', 'discrepancy')):
        case.must('solve', '--engine', 'dense', '--damping', repr(float(E[key]) / sigma), '--overwrite')
        for v, r in zip(estimates(case), table(folder, 'expected_solutions.csv')):
            near(v, r[column], 1e-5, 1e-7, f'{column} x{r["index"]}')


add('15: corner, GCV, discrepancy and their solutions', choose, '15')
add('17: corner, GCV, discrepancy and their solutions', choose, '17')


def smoothing(order):
    prefer = ('smallest', 'flattest', 'smoothest')[order]
    A, b = matrix('17', 'A.csv'), [r[0] for r in matrix('17', 'b.csv')]
    sigma = [r[0] for r in matrix('17b', 'sigma.csv')]
    case = dense_case(A, b, sigma)
    case.table('parameters.csv', ('parameter', 'x'), [(f'x{j + 1}', j + 1) for j in range(20)])
    rows = [r for r in table('17b', 'expected_fixed_lambda.csv') if int(r['L_order']) == order]
    solutions = {r['lambda']: r for r in table('17b', 'expected_solutions.csv') if int(r['L_order']) == order}
    for r in rows:
        case.must('solve', '--engine', 'dense', '--prefer', prefer, '--damping', r['lambda'], '--sigma', 'posterior', '--overwrite')
        S, P = case.summary(), case.parameters()
        near(math.sqrt(S['fit']['chi_square']), r['weighted_residual_norm'], 1e-8, what=f'misfit at {r["lambda"]}')
        near(S['damping']['effective_parameters'], r['trace_resolution'], 1e-8, what=f'trace at {r["lambda"]}')
        near(P['x1']['resolution'], r['resolution_diag_1'], 1e-8, 1e-10, f'resolution at {r["lambda"]}')
        near(P['x10']['resolution'], r['resolution_diag_10'], 1e-8, 1e-10, f'resolution at {r["lambda"]}')
        near(P['x10']['sigma'], r['sd_x10_from_inverse(N+l2LtL)'], 1e-8, what=f'posterior sigma at {r["lambda"]}')
        for j in range(20):
            near(P[f'x{j + 1}']['estimate'], solutions[r['lambda']][f'x{j + 1}'], 1e-7, 1e-8, f'x{j + 1} at {r["lambda"]}')
        case.must('solve', '--engine', 'dense', '--prefer', prefer, '--damping', r['lambda'], '--overwrite')
        near(case.parameters()['x10']['sigma'], r['sd_x10_data_noise_only'], 1e-7, what=f'noise sigma at {r["lambda"]}')
    case.must('sweep', '--engine', 'dense', '--prefer', prefer, '--dampings', ','.join(r['lambda'] for r in rows), '--overwrite', codes=(0, 1))
    curve = {float(r['damping']): r for r in case.rows('tradeoff.csv')}
    for r in rows:
        near(curve[float(r['lambda'])]['size'], r['seminorm_Lx'], 1e-8, what=f'size at {r["lambda"]}')
        near(curve[float(r['lambda'])]['gcv'], r['gcv'], 1e-8, what=f'gcv at {r["lambda"]}')
    E = expected('17b', f'expected_selection_L{order}.csv')
    case.must('sweep', '--engine', 'dense', '--prefer', prefer, '--dampings', '0.01:1000:241', '--overwrite', codes=(0, 1))
    found = choices(case)
    near(found['corner']['damping'], E['lcurve_max_curvature_lambda'], 1e-4)
    near(found['gcv']['damping'], E['gcv_lambda'], 1e-4)
    near(found['discrepancy']['damping'], E['discrepancy_lambda_weighted_rss_equals_n'], 1e-6)
    assert found['gcv']['warning'], 'a rival minimum of GCV of almost the same depth is not told'


for order in (0, 1, 2):
    add(f'17b: unequal weights, difference of order {order}: solutions, both sigmas, resolution, choices', smoothing, order)


@test('12: Longley, ordinary least squares in the certified units')
def _():
    E, rows = expected('12'), table('12', 'inputs_certified_units.csv')
    names = ['GNP.deflator', 'GNP', 'Unemployed', 'Armed.Forces', 'Population', 'Year']
    case = dense_case([['1'] + [r[n] for n in names] for r in rows], [r['Employed'] for r in rows], None, ['intercept'] + names)
    case.must('solve')
    for n, r in case.parameters().items():
        near(r['estimate'], E['coef_' + n], 1e-15, what=n)
        near(r['sigma'], E['sd_' + n], 1e-15, what='sd ' + n)
    near(case.summary()['fit']['chi_square'], E['residual_sum_of_squares'], 1e-15)
    near(case.summary()['fit']['variance_factor'], float(E['residual_sd']) ** 2, 1e-14)


@test('13: ridge on Longley: GCV minimiser with the intercept counted, coefficients at the other minimiser')
def _():
    # centred columns of root mean square 1, response centred; an intercept with damp_weight 0 is counted by the trace
    E, rows = expected('13', 'expected_high_precision.csv'), table('13', 'inputs.csv')
    names = ['GNP.deflator', 'GNP', 'Unemployed', 'Armed.Forces', 'Population', 'Year']
    columns, scale = [], {}
    for n in names:
        v = [float(r[n]) for r in rows]
        mean = math.fsum(v) / len(v)
        scale[n] = math.sqrt(math.fsum((x - mean) ** 2 for x in v) / len(v))
        columns.append([(x - mean) / scale[n] for x in v])
    A = [[1.0] + [c[i] for c in columns] for i in range(len(rows))]
    case = dense_case(A, [r['Employed'] for r in rows], None, ['intercept'] + names)
    case.table('parameters.csv', ('parameter', 'damp_weight'), [('intercept', 0)] + [(n, 1) for n in names])
    case.must('sweep', '--engine', 'dense', '--dampings', '0.005:1:121', codes=(0, 1))
    near(choices(case)['gcv']['damping'], math.sqrt(float(E['gcv_minimiser_if_intercept_counted_in_trace'])), 1e-4)
    case.must('sweep', '--engine', 'dense', '--dampings', repr(math.sqrt(float(E['gcv_minimiser_if_intercept_counted_in_trace']))), '--overwrite', codes=(0, 1))
    near(case.rows('tradeoff.csv')[0]['gcv'], E['gcv_minimum_if_intercept_counted'], 1e-9)
    case.must('solve', '--engine', 'dense', '--damping', E['equivalent_mu_when_penalty_is_mu^2'], '--overwrite')
    for n in names:
        near(float(case.parameters()[n]['estimate']) / scale[n], E['coef_' + n], 1e-9, what=n)
    near(case.summary()['fit']['chi_square'], E['rss_at_minimiser'], 1e-10)
    near(case.summary()['damping']['effective_parameters'], float(E['effective_dof_slopes_at_minimiser']) + 1, 1e-10)


def stackloss():
    rows = table('18', 'inputs.csv')
    names = ['Air.Flow', 'Water.Temp', 'Acid.Conc.']
    return dense_case([['1'] + [r[n] for n in names] for r in rows], [r['stack.loss'] for r in rows], None, ['(Intercept)'] + names)


@test('18: stack loss, least squares')
def _():
    E = {r['quantity']: r['value'] for r in table('18', 'expected.csv') if r['method'] == 'ols'}
    case = stackloss()
    case.must('solve')
    for n, r in case.parameters().items():
        near(r['estimate'], E[n], 1e-13, what=n)
        near(r['sigma'], E['sd_' + n], 1e-13, what='sd ' + n)
    for r, e in zip(case.rows('residuals.csv'), table('18', 'expected_rows.csv')):
        near(-float(r['residual']), e['ols_residual'], 1e-11, 1e-13)
        near(1 - float(r['redundancy']), e['ols_leverage'], 1e-11)
        near(-float(r['standardized']), e['ols_internally_studentized'], 1e-11)


@test('18: stack loss, Huber with k = 1.345 and scale median |r| / 0.6745, converged')
def _():
    E = {r['quantity']: r['value'] for r in table('18', 'expected.csv') if r['method'] == 'huber_k1.345_MAD_converged'}
    case = stackloss()
    case.must('solve', '--misfit', 'huber', codes=(0, 1))
    for n, r in case.parameters().items():
        near(r['estimate'], E[n], 1e-9, what=n)
    for r, e in zip(case.rows('residuals.csv'), table('18', 'expected_rows.csv')):
        near(-float(r['residual']), e['huber_residual'], 1e-8, 1e-9)
        near(r['weight'], e['huber_weight'], 1e-8)


@test('18: stack loss, least absolute values: the exact fractions, four rows met exactly')
def _():
    E = expected('18', 'expected_L1_exact.csv')
    case = stackloss()
    case.must('solve', '--misfit', 'l1', codes=(0, 1))
    for n, r in case.parameters().items():
        near(r['estimate'], E[n], 1e-14, what=n)
    residuals = [float(r['residual']) for r in case.rows('residuals.csv')]
    near(math.fsum(map(abs, residuals)), E['sum_abs_residuals'], 1e-13)
    equal([i + 1 for i, v in enumerate(residuals) if abs(v) < 1e-10], [2, 8, 16, 18])


def damped(engine):
    A, b = matrix('19', 'A.csv'), [r[0] for r in matrix('19', 'b.csv')]
    cases = {}
    for r in table('19', 'expected.csv'):
        cases.setdefault(r['damp'], {})[r['quantity']] = float(r['value'])
    case = dense_case(A, b, ['1'] * len(b))
    direct = engine in ('dense', 'cholesky', 'qr')
    for text, E in cases.items():
        value = float(text.split('/')[0]) / float((text + '/1').split('/')[1])
        words = ['--damping', repr(value) if value else 'none'] + ([] if direct else ['--tolerance', '1e-10'])
        case.must('solve', '--engine', engine, *words, '--sigma', 'posterior', '--overwrite')
        P, S = case.parameters(), case.summary()
        for j in range(5):
            near(P[f'x{j + 1}']['estimate'], E[f'x{j + 1}'], 1e-15 if direct and not value else 1e-13 if direct else 1e-11, what=f'x{j + 1} damp {text}')
            if direct:
                near(float(P[f'x{j + 1}']['sigma']) ** 2, E[f'diag_inverse_normal_{j + 1}'], 1e-12, what=f'variance {j + 1} damp {text}')
        near(math.sqrt(S['fit']['chi_square']), E['residual_norm'], 1e-12, what=f'misfit damp {text}')
        if not direct:
            assert S['engine']['steps'] <= 7, S['engine']


for engine in ENGINES:
    add(f'19: damped least squares 8 x 5, {engine}', damped, engine)


def bounded(name, low, high):
    A, b = matrix('20', 'A.csv'), [r[0] for r in matrix('20', 'b.csv')]
    E = {r['quantity']: float(r['value']) for r in table('20', 'expected.csv') if r['case'] == name}
    case = dense_case(A, b, ['1'] * len(b))
    if low or high:
        case.table('parameters.csv', ('parameter', 'lower', 'upper'), [(f'x{j + 1}', low, high) for j in range(4)])
    case.must('solve')
    P = case.parameters()
    near(case.summary()['fit']['chi_square'], E['residual_sum_of_squares'], 1e-12)
    for j in range(1, 5):
        p, x = P[f'x{j}'], E[f'x{j}']
        near(p['estimate'], x, 1e-12, 1e-13, f'x{j}')
        at = 'lower' if low and x == float(low) else 'upper' if high and x == float(high) else ''
        if low or high:
            equal(p['at_bound'], at, f'at_bound of x{j}')
            if at:
                equal(float(p['estimate']), x, 'a parameter at its bound has just that value')
            near(abs(float(p['bound_multiplier'] or 0)), abs(E[f'gradient_{j}']), 1e-10, 1e-10, f'multiplier of x{j}')


for name, low, high in (('nonnegative', '0', ''), ('box_0_to_1', '0', '1'), ('box_minus1_to_2', '-1', '2'), ('unbounded', '', '')):
    add(f'20: {name}', bounded, name, low, high)

ROOT2 = repr(math.sqrt(2))
RAYS = [(1, 2, 3), (4, 5, 6), (7, 8, 9), (1, 4, 7), (2, 5, 8), (3, 6, 9)]


def nine_blocks():
    """Rows, columns, the main diagonal and one ray through the corner block (cell 9), as the path sums of the case say."""
    rays = [[(c, '1') for c in ray] for ray in RAYS] + [[(1, ROOT2), (5, ROOT2), (9, ROOT2)], [(9, ROOT2)]]
    case = Case()
    case.table('design.csv', DESIGN, [(f'r{i}', f'c{c}', v) for i, ray in enumerate(rays, 1) for c, v in ray])
    # the slowness of a spike of 1 in cell 5
    case.table('observations.csv', ('observation', 'value', 'sigma'), [(f'r{i}', sum(float(v) for c, v in ray if c == 5), '1') for i, ray in enumerate(rays, 1)])
    case.table('parameters.csv', ('parameter',), [(f'c{j}',) for j in range(1, 10)])
    return case


@test('21: nine blocks: rank, defect, hits and path lengths')
def _():
    E, case = expected('21'), nine_blocks()
    said = case.run('inspect').stdout
    matches(said, r'rank +' + E['rank'] + r'\b')
    matches(said, r'datum defect +' + E['model_null_space_dimension'] + r'\b')
    equal(case.run('solve').returncode, 4)
    case.must('solve', '--damping', '1')
    for j in range(1, 10):
        p = case.parameters()[f'c{j}']
        equal(int(p['hits']), int(E[f'hit_count_cell{j}']))
        near(p['coverage'], E[f'path_length_sum_cell{j}'], 1e-13)


@test('21: nine blocks: the smallest of all solutions is that of the generalized inverse')
def _():
    E, case = expected('21'), nine_blocks()
    spike = {r['cell']: float(r['recovered']) for r in table('21', 'expected_spike_cell5.csv')}
    case.must('solve', '--datum', 'free')
    S = case.summary()
    equal(S['sizes']['rank'], 7)
    for j in range(1, 10):
        p = case.parameters()[f'c{j}']
        near(p['estimate'], spike[str(j)], 1e-9, 1e-11, f'spike, cell {j}')
        near(p['resolution'], E[f'model_resolution_diag_cell{j}'], 1e-10, what=f'resolution, cell {j}')


def damped_resolution(row, engine):
    case = nine_blocks()
    case.must('solve', '--damping', row['lambda'], '--engine', engine)
    P = case.parameters()
    for j in range(1, 10):
        near(P[f'c{j}']['resolution'], row[f'diag{j}'], 1e-10, what=f'cell {j}')
    near(case.summary()['damping']['effective_parameters'], row['trace'], 1e-10)


for row in table('21', 'expected_damped_resolution.csv'):
    for engine in ('dense', 'cholesky', 'qr'):
        add(f'21: nine blocks: damped resolution, lambda {row["lambda"]}, {engine}', damped_resolution, row, engine)


@test('21: nine blocks: a row of the resolution matrix in the limit of no damping')
def _():
    case = nine_blocks()
    R = {r['cell']: r for r in table('21', 'expected_resolution_matrix.csv')}
    case.must('solve', '--damping', '1e-6', '--engine', 'dense', '--resolution-of', 'c5,c6')
    found = case.rows('resolution.csv')
    for r in found:
        cells = list(r.values())
        for cell in ('c5', 'c6'):
            if cell in r:
                near(r[cell], R[cell[1:]]['cell' + r['parameter'][1:]], 0, 1e-9, f'{cell}, {r["parameter"]}')
    assert 'c5' in found[0] or any('c5' in list(r.values())[:2] for r in found), found[:2]


run()
