#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Published and recomputed networks: levelling, baselines, trilateration, ellipses, closed forms. Sources stand in each folder."""
import glob
import math
import os
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), '..', 'command', 'lib'))
from case import DESIGN, REFERENCE, Case, read_csv
from tap import add, equal, near, run, test

DIRECT = ('dense', 'cholesky', 'qr')


def table(folder, name):
    return read_csv(os.path.join(glob.glob(os.path.join(REFERENCE, folder + '-*'))[0], name))


def expected(folder, name='expected.csv'):
    return {r['quantity']: r['value'] for r in table(folder, name)}


def levelling(folder, dh, sigma, held, approximate=None):
    """sigma: of a line as a function of its row; held: {point: height}."""
    case, design, observations = Case(), [], []
    for r in table(folder, 'inputs.csv'):
        design += [(r['obs'], r['from'], '-1'), (r['obs'], r['to'], '1')]
        observations.append((r['obs'], r[dh], sigma(r)))
    points = sorted({p for r in table(folder, 'inputs.csv') for p in (r['from'], r['to'])})
    case.table('design.csv', DESIGN, design)
    case.table('observations.csv', ('observation', 'value', 'sigma'), observations)
    case.table('parameters.csv', ('parameter', 'prior', 'fixed'), [(p, (approximate or {}).get(p, '0'), held.get(p, '')) for p in points])
    return case


def check_net(case, E, unit=1e-12, names='BCD', prefix='sd_apriori_'):
    P, R, S = case.parameters(), case.residuals(), case.summary()
    for n in names:
        near(P[n]['estimate'], E['height_' + n], 1e-13, what='height ' + n)
        near(P[n]['sigma'], E[prefix + n], unit, what='sd ' + n)
    for k, r in R.items():
        near(r['residual'], E['residual_' + k], unit, 1e-15, 'residual ' + k)
        near(r['redundancy'], E['redundancy_' + k], unit, what='redundancy ' + k)
        for column, name in (('standardized', 'w_'), ('detectable', 'mdb_')):
            if name + k in E and prefix == 'sd_apriori_':
                near(r[column], E[name + k], 1e-11, what=name + k)
    near(S['fit']['chi_square'], E['vTPv'], unit)
    equal(S['sizes']['degrees_of_freedom'], int(E['dof']))
    near(S['fit']['variance_factor'], E['variance_factor'], unit)


def net01(engine):
    E = expected('01')
    case = levelling('01', 'dh_m', lambda r: r['sigma_m'], {'A': '437.596'})
    case.must('solve', '--engine', engine)
    check_net(case, E)
    verdict = next(r for r in table('11', 'global_and_local_test_results.csv') if r['example'] == '01')
    S = case.summary()
    upper = float(verdict['upper_tail_probability'])
    near(S['fit']['probability'], 2 * min(upper, 1 - upper), 1e-10)
    equal(S['fit']['rejected'], verdict['two_sided_5_percent'] != 'pass')
    case.must('solve', '--engine', engine, '--variance', 'estimated', '--overwrite', '--covariance-of', 'all')
    check_net(case, E, prefix='sd_apost_')
    for k, r in case.residuals().items():
        near(r['standardized'], E['tau_' + k], 1e-11, what='tau ' + k)
    for r in case.rows('parameter_covariance.csv'):
        name = 'Q_' + '_'.join(sorted((r['parameter_a'], r['parameter_b'])))
        if name in E:
            near(r['covariance'], float(E[name]) * float(E['variance_factor']), 1e-11, what=name)


def net02(name, weighted):
    E = expected('02', name)
    sigma = (lambda r: repr(math.sqrt(float(r['length_mi']) / 12))) if weighted else (lambda r: '1')
    case = levelling('02', 'dh_ft', sigma, {'X': '100.00', 'Y': '107.50'})
    case.must('solve', '--variance', 'estimated')
    check_net(case, E, 1e-12, 'ABC', 'sd_apost_')
    for k, r in case.residuals().items():
        near(r['standardized'], E['tau_' + k], 1e-11, what='tau ' + k)


for engine in DIRECT:
    add(f'01: six lines weighted by 1/sigma^2, {engine}', net01, engine)
add('02: seven lines between two benchmarks, unweighted', net02, 'expected_unweighted.csv', False)
add('02: seven lines between two benchmarks, weights 12/L', net02, 'expected_weighted_12_over_L.csv', True)


@test('02: all weights times a constant change neither heights nor a posteriori standard deviations')
def _():
    E = expected('02', 'expected_weighted_12_over_L.csv')
    case = levelling('02', 'dh_ft', lambda r: repr(7 * math.sqrt(float(r['length_mi']) / 12)), {'X': '100.00', 'Y': '107.50'})
    case.must('solve', '--variance', 'estimated')
    for n in 'ABC':
        near(case.parameters()[n]['estimate'], E['height_' + n], 1e-13)
        near(case.parameters()[n]['sigma'], E['sd_apost_' + n], 1e-12)


def free(engine):
    E = expected('05')
    approximate = {r['point']: r['height_m'] for r in table('05', 'approximate_heights.csv')}
    case = levelling('05', 'dh_m', lambda r: r['sigma_m'], {}, approximate)
    done = case.run('solve', '--engine', engine)
    equal(done.returncode, 4, 'a datum defect is refused')
    case.must('solve', '--engine', engine, '--datum', 'free', '--variance', 'estimated')
    P, S = case.parameters(), case.summary()
    for n in 'ABCD':
        near(float(P[n]['estimate']) - float(approximate[n]), E['correction_' + n], 1e-10, 1e-13, 'correction ' + n)
        near(P[n]['sigma'], E['sd_apost_' + n], 1e-11, what='sd ' + n)
    for k, r in case.residuals().items():
        near(r['residual'], E['residual_' + k], 1e-11, 1e-15)
        near(r['redundancy'], expected('01')['redundancy_' + k], 1e-11)
    equal((S['sizes']['rank'], S['sizes']['degrees_of_freedom']), (int(E['rank_of_N']), int(E['dof'])))
    near(S['fit']['chi_square'], E['vTPv'], 1e-11)


for engine in DIRECT:
    add(f'05: free net, {engine}', free, engine)


@test('08: baselines with variances, coordinates of millions of metres')
def _():
    E, held = expected('08'), table('08', 'fixed.csv')[0]
    case, design, observations = Case(), [], []
    for r in table('08', 'inputs.csv'):
        for axis in 'XYZ':
            name = f'{r["baseline"]}_{axis}'
            design += [(name, f'{axis}_{r["from"]}', '-1'), (name, f'{axis}_{r["to"]}', '1')]
            observations.append((name, r[f'd{axis}_m'], repr(math.sqrt(float(r[f'var{axis}_m2'])))))
    case.table('design.csv', DESIGN, design)
    case.table('observations.csv', ('observation', 'value', 'sigma'), observations)
    case.table('parameters.csv', ('parameter', 'fixed', 'point', 'axis'),
               [(f'{a}_{p}', held[f'{a}_m'] if p == 'A' else '', p, a.lower()) for p in 'ABCD' for a in 'XYZ'])
    for variance, prefix in (('stated', 'sd_apriori_'), ('estimated', 'sd_apost_')):
        case.must('solve', '--variance', variance, '--overwrite')
        P, S = case.parameters(), case.summary()
        for p in 'BCD':
            for a in 'XYZ':
                near(P[f'{a}_{p}']['estimate'], E[f'{a}_{p}'], 1e-15, what=f'{a}_{p}')
                near(P[f'{a}_{p}']['sigma'], E[f'{prefix}{a}_{p}'], 1e-12, what=f'sd {a}_{p}')
        for k, r in case.residuals().items():
            near(r['residual'], E['residual_' + k], 1e-10, 1e-14, 'residual ' + k)
        near(S['fit']['chi_square'], E['vTPv'], 1e-11)
        equal(S['sizes']['degrees_of_freedom'], 9)
    case.must('solve', '--overwrite')
    S = case.summary()
    verdict = next(r for r in table('11', 'global_and_local_test_results.csv') if r['example'] == '08')
    near(S['fit']['probability'], 2 * (1 - float(verdict['upper_tail_probability'])), 1e-9)
    equal(S['fit']['rejected'], True)


@test('09: trilateration, the last linearization: estimate, redundancy, error ellipses')
def _():
    E = expected('09')
    fixed = {r['point']: (float(r['x_east_ft']), float(r['y_north_ft'])) for r in table('09', 'fixed.csv')}
    x0 = (6861.316787718086, 3727.818565717482)
    case, design, observations = Case(), [], []
    for r in table('09', 'inputs.csv'):
        dx, dy = x0[0] - fixed[r['from']][0], x0[1] - fixed[r['from']][1]
        s = math.hypot(dx, dy)
        design += [(r['obs'], 'x', dx / s), (r['obs'], 'y', dy / s)]
        observations.append((r['obs'], float(r['distance_ft']) - s))
    case.table('design.csv', DESIGN, design)
    case.table('observations.csv', ('observation', 'value'), observations)
    case.table('parameters.csv', ('parameter', 'point', 'axis'), [('x', 'U', 'east'), ('y', 'U', 'north')])
    case.must('solve', '--covariance-of', 'all')
    P, s0 = case.parameters(), float(E['sigma0_aposteriori'])
    near(P['x']['estimate'], 0, absolute=1e-9)
    near(P['y']['estimate'], 0, absolute=1e-9)
    near(P['x']['sigma'], E['sd_x'], 1e-9)
    near(P['y']['sigma'], E['sd_y'], 1e-9)
    for k, r in case.residuals().items():
        near(r['residual'], E['residual_' + k], 1e-9)
        near(r['redundancy'], E['redundancy_' + k], 1e-9)
        equal(r['standardized'], '', 'tau needs two degrees of freedom')
    near(case.summary()['fit']['variance_factor'], s0 ** 2, 1e-9)
    Q = {(r['parameter_a'], r['parameter_b']): float(r['covariance']) / s0 ** 2 for r in case.rows('parameter_covariance.csv')}
    near(Q.get(('x', 'y'), Q.get(('y', 'x'))), E['Qxy'], 1e-9)
    standard, large = sorted(case.rows('ellipses.csv'), key=lambda r: float(r['multiplier']))
    near(standard['semi_major'], E['ellipse_semi_major_standard'], 1e-9)
    near(standard['semi_minor'], E['ellipse_semi_minor_standard'], 1e-9)
    near(standard['azimuth'], E['ellipse_azimuth_of_major_deg'], 1e-9)
    near(large['multiplier'], E['multiplier_95_percent_F'], 1e-9)
    near(large['semi_major'], E['semi_major_95_F'], 1e-9)
    near(large['semi_minor'], E['semi_minor_95_F'], 1e-9)
    case.must('solve', '--variance', 'stated', '--overwrite')
    large = max(case.rows('ellipses.csv'), key=lambda r: float(r['multiplier']))
    near(large['multiplier'], E['multiplier_95_percent_chi2'], 1e-9)


def ellipse(inputs, wanted):
    """A point whose two coordinates are read directly, with the covariance of the case."""
    s0, xx, xy, yy = (float(inputs[c]) for c in ('sigma0', 'Qxx_east', 'Qxy', 'Qyy_north'))
    case = Case(design='observation,parameter,coefficient\ne,E,1\nn,N,1\n', observations='observation,value\ne,1\nn,2\n',
                parameters='parameter,point,axis\nE,U,east\nN,U,north\n')
    case.table('covariance.csv', ('observation_a', 'observation_b', 'covariance'),
               [('e', 'e', s0 * s0 * xx), ('e', 'n', s0 * s0 * xy), ('n', 'n', s0 * s0 * yy)])
    case.must('solve')
    found = min(case.rows('ellipses.csv'), key=lambda r: float(r['multiplier']))
    near(found['semi_major'], wanted['semi_major'], 1e-12)
    near(found['semi_minor'], wanted['semi_minor'], 1e-12)
    if wanted['azimuth_of_major_deg'] == 'undefined':
        equal(found['azimuth'], '')
    else:
        near(found['azimuth'], wanted['azimuth_of_major_deg'], 1e-11)


for inputs, wanted in zip(table('10', 'inputs.csv'), table('10', 'expected.csv')):
    add(f'10: ellipse {inputs["case"]}', ellipse, inputs, wanted)


def detectable(row):
    """Two readings of one unknown: redundancy 1/2 each, so detectable = delta0 sqrt 2."""
    case = Case(design='observation,parameter,coefficient\na,x,1\nb,x,1\n', observations='observation,value,sigma\na,1,1\nb,2,1\n')
    case.must('solve', '--alpha', row['alpha0'], '--power', row['power'])
    for r in case.rows('residuals.csv'):
        near(r['detectable'], float(row['delta0']) * math.sqrt(2), 1e-10)
        near(r['bias_ratio'], row['delta0'], 1e-10)


for row in table('11', 'noncentrality_delta0.csv'):
    add(f'11: smallest detectable error at alpha {row["alpha0"]}, power {row["power"]}', detectable, row)


def analytic(name):
    return {r['quantity']: float(r['value']) for r in table('25', 'expected.csv') if r['case'] == name and r['value'].replace('.', '').replace('-', '').replace('e', '').isdigit()}


@test('25: a loop: corrections, redundancy and three equal w')
def _():
    E = analytic('loop_misclosure')
    case = Case(design='observation,parameter,coefficient\n1,B,1\n2,B,-1\n2,C,1\n3,C,-1\n', observations='observation,value,sigma\n1,4,1\n2,7,2\n3,3,3\n')
    case.must('solve')
    for k, r in case.residuals().items():
        near(r['residual'], E['correction_' + k], 1e-13)
        near(r['redundancy'], E['redundancy_' + k], 1e-13)
        near(r['standardized'], E['w_test_' + k], 1e-12)
    near(case.summary()['fit']['chi_square'], E['vTPv'], 1e-13)


@test('25: weighted mean, and the correlated mean with a negative weight')
def _():
    E = analytic('weighted_mean')
    case = Case(design='observation,parameter,coefficient\na,m,1\nb,m,1\nc,m,1\n', observations='observation,value,sigma\na,10.10,0.02\nb,10.16,0.04\nc,10.12,0.02\n')
    case.must('solve')
    p, s = case.parameters()['m'], case.summary()
    equal(float(p['estimate']), E['mean'])
    near(p['sigma'], math.sqrt(E['variance_apriori']), 1e-15)
    near(s['fit']['chi_square'], E['vTPv'], 1e-13)
    near(s['fit']['variance_factor'], E['sigma0_squared'], 1e-13)
    for r, k in zip(case.rows('residuals.csv'), '123'):
        near(r['redundancy'], E['redundancy_' + k], 1e-14)
    E = analytic('correlated_mean')
    case = Case(design='observation,parameter,coefficient\na,m,1\nb,m,1\n', observations='observation,value,sigma\na,10,1\nb,11,2\n',
                covariance='observation_a,observation_b,covariance\na,b,1.6\n')
    case.must('solve')
    near(case.parameters()['m']['estimate'], E['estimate_of_10_and_11'], 1e-15)
    near(float(case.parameters()['m']['sigma']) ** 2, E['variance'], 1e-14)


@test('25: a line between two benchmarks: variances a (L - a) / L')
def _():
    E = analytic('line_between_benchmarks')
    case = Case(design='observation,parameter,coefficient\n1,a,1\n2,a,-1\n2,b,1\n3,b,-1\n3,c,1\n4,c,-1\n',
                observations='observation,value,sigma\n1,1,1\n2,1,1\n3,1,1\n4,-3,1\n')
    case.must('solve')
    near(float(case.parameters()['a']['sigma']) ** 2, E['variance_at_1_of_4_km'], 1e-14)
    near(float(case.parameters()['b']['sigma']) ** 2, E['variance_at_2_of_4_km'], 1e-14)


@test('25: a straight line: slope, intercept, cofactors, leverages, leave-one-out residuals')
def _():
    E = analytic('line_fit')
    y = [1, 3, 2, 5, 4]
    case = Case()
    case.table('design.csv', DESIGN, [r for i in range(5) for r in ((f'{i + 1}', 'a', 1), (f'{i + 1}', 'b', i))])
    case.table('observations.csv', ('observation', 'value'), [(f'{i + 1}', y[i]) for i in range(5)])
    case.must('solve', '--covariance-of', 'all')
    P, S = case.parameters(), case.summary()
    near(P['b']['estimate'], E['slope'], 1e-15)
    near(P['a']['estimate'], E['intercept'], 1e-15)
    near(S['fit']['chi_square'], E['sum_of_squares'], 1e-14)
    near(S['fit']['variance_factor'], E['sigma0_squared'], 1e-14)
    near(float(P['b']['sigma']) ** 2, E['sigma0_squared'] * E['variance_factor_slope_cofactor'], 1e-14)
    near(float(P['a']['sigma']) ** 2, E['sigma0_squared'] * E['intercept_cofactor'], 1e-14)
    C = {frozenset((r['parameter_a'], r['parameter_b'])): float(r['covariance']) for r in case.rows('parameter_covariance.csv')}
    near(C[frozenset('ab')], E['sigma0_squared'] * E['covariance_cofactor'], 1e-13)
    for k, r in case.residuals().items():
        near(1 - float(r['redundancy']), E['leverage_' + k], 1e-13)
        near(float(r['residual']) / float(r['redundancy']), E['leave_one_out_residual_' + k], 1e-12)


@test('25: an orthogonal design: shrinkage 4 / (4 + lambda^2), degrees of freedom, GCV')
def _():
    E = analytic('orthogonal_ridge')
    H = [[1, 1, 1], [1, -1, 1], [1, 1, -1], [1, -1, -1]]
    case = Case()
    case.table('design.csv', DESIGN, [(f'o{i}', f'x{j + 1}', H[i][j]) for i in range(4) for j in range(3)])
    case.table('observations.csv', ('observation', 'value'), [(f'o{i}', v) for i, v in enumerate((1, 2, 4, 3))])
    signs = None
    for damping in (0, 1, 2):
        case.must('solve', '--damping', str(damping) if damping else 'none', '--overwrite')
        S = case.summary()
        near(S['fit']['chi_square'], E[f'rss_lambda_{damping}'], 1e-13)
        near(S['damping']['effective_parameters'], E[f'effective_dof_lambda_{damping}'], 1e-13)
        x = [float(r['estimate']) for r in case.rows('parameters.csv')]
        near(sum(v * v for v in x), E[f'solution_norm_squared_lambda_{damping}'], 1e-13)
        equal(sorted(round(abs(v), 12) for v in x), sorted(round(abs(E[f'x{j}_lambda_{damping}']), 12) for j in (1, 2, 3)))
    case.must('sweep', '--dampings', '1,2', '--engine', 'dense', '--overwrite', codes=(0, 1))
    for r in case.rows('tradeoff.csv'):
        near(r['gcv'], E[f'gcv_lambda_{int(float(r["damping"]))}'], 1e-12)


@test('25: the discrepancy damping of one reading in closed form')
def _():
    # a = 3, b = 10, misfit 0.5: with sigma 0.5 the target of chi-square is 1
    E = analytic('scalar_discrepancy')
    case = Case(design='observation,parameter,coefficient\na,x,3\n', observations='observation,value,sigma\na,10,0.5\n')
    case.must('sweep', '--engine', 'dense', '--dampings', '0.01:100:81', codes=(0, 1))
    found = next(c for c in case.summary()['choices'] if c['criterion'] == 'discrepancy')
    near(found['damping'], E['lambda'] / 0.5, 1e-6)


@test('25: two distances to a point: semi-axes 1 / sqrt(1 -+ cos)')
def _():
    E = analytic('two_distance_fix')
    for angle in (90, 60, 30):
        half = math.radians(angle) / 2
        case = Case()
        case.table('design.csv', DESIGN, [('a', 'E', math.sin(half)), ('a', 'N', math.cos(half)), ('b', 'E', -math.sin(half)), ('b', 'N', math.cos(half))])
        case.put('observations.csv', 'observation,value,sigma\na,0,1\nb,0,1\n')
        case.put('parameters.csv', 'parameter,point,axis\nE,U,east\nN,U,north\n')
        case.must('solve')
        found = min(case.rows('ellipses.csv'), key=lambda r: float(r['multiplier']))
        near(found['semi_major'], E[f'semi_major_angle_{angle}'], 1e-12)
        near(found['semi_minor'], E[f'semi_minor_angle_{angle}'], 1e-12)


@test('25: a gravity loop with drift, and a station read once that nothing checks')
def _():
    E = analytic('gravity_drift_loop')
    readings = [('1', None, 0, '0.000'), ('2', 'B', 1, '12.340'), ('3', 'C', 2, '7.910'), ('4', 'B', 3, '12.402'), ('5', None, 4, '0.116')]
    case = Case()
    case.table('design.csv', DESIGN, [row for n, p, t, _ in readings for row in
                                      [(n, 'offset', '1')] + ([(n, p, '1')] if p else []) + ([(n, 'drift', str(t))] if t else [])])
    case.table('observations.csv', ('observation', 'value'), [(n, v) for n, _, _, v in readings])
    case.must('solve')
    P, R = case.parameters(), case.residuals()
    for name, key in (('offset', 'offset'), ('B', 'gB_minus_gA'), ('C', 'gC_minus_gA'), ('drift', 'drift_per_hour')):
        near(P[name]['estimate'], E[key], 1e-14, 1e-16, name)
    for k, r in R.items():
        near(r['residual'], E['residual_' + k], 1e-12, 1e-16)
    near(R['3']['redundancy'], 0, absolute=1e-14)
    equal((R['3']['detectable'], R['3']['standardized']), ('', ''))


run()
