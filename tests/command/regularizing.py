#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Penalties through the whole program: engines against each other, null models, memory, storage, resolution."""
import os
import random
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), 'lib'))
from case import ENGINES, Case, crosshole, read_csv
from tap import add, equal, matches, near, run, test

DIRECT = ('dense', 'cholesky', 'qr')
ITERATIVE = ('lsqr', 'cgls', 'lsmr')


def estimates(case, out=None):
    return [float(row['estimate']) for row in case.rows('parameters.csv', out)]


def agree(found, expected, relative, what=''):
    scale = max(abs(v) for v in expected)
    worst = max(abs(a - b) for a, b in zip(found, expected))
    assert worst <= relative * scale, f'{what}: apart by {worst:.3g}, largest value {scale:.3g}'


def rays(case, nx, nz, shots):
    """Cross-hole rays and some cells read by themselves: rays from hole to hole leave planes undetermined."""
    design = crosshole(case, nx, nz, shots)
    observations = [(row['observation'], row['value'], row['sigma']) for row in read_csv(case.path('observations.csv'))]
    alone = range(0, nx * nz, 7)
    case.table('design.csv', ('observation', 'parameter', 'coefficient'), design + [[f'own{k}', f'c{k}', 1.0] for k in alone])
    case.table('observations.csv', ('observation', 'value', 'sigma'),
               observations + [(f'own{k}', 0.5 + 0.01 * (k % 5), 0.05) for k in alone])
    return design + [[f'own{k}', f'c{k}', 1.0] for k in alone]


def exact_data(case, truth):
    """Readings that the model `truth(x, z)` meets exactly, of rays and of every cell by itself."""
    design = crosshole(case, 8, 7, 9)
    place = {row['parameter']: (float(row['x']), float(row['z'])) for row in read_parameters(case)}
    design += [[f'own{k}', cell, 1.0] for k, cell in enumerate(place)]
    sums = {}
    for name, cell, length in design:
        sums[name] = sums.get(name, 0.0) + length * truth(*place[cell])
    case.table('design.csv', ('observation', 'parameter', 'coefficient'), design)
    case.table('observations.csv', ('observation', 'value', 'sigma'), [(n, v, 0.1) for n, v in sums.items()])
    return [truth(*p) for p in place.values()]


def read_parameters(case):
    return read_csv(case.path('parameters.csv'))


def null_model(engine, prefer, truth):
    case = Case()
    expected = exact_data(case, truth)
    for damping in ('0.01', '10', '10000'):
        case.must('solve', '--engine', engine, '--prefer', prefer, '--damping', damping, '--sigma', 'none', '--overwrite')
        agree(estimates(case), expected, 1e-9, f'{engine} at {damping}')


for engine_ in ENGINES:
    for prefer_ in ('flattest', 'smoothest'):
        add(f'a constant model comes back under {prefer_} at any damping, {engine_}', null_model, engine_, prefer_, lambda x, z: 0.7)
    add(f'a plane comes back under smoothest at any damping, {engine_}', null_model, engine_, 'smoothest',
        lambda x, z: 0.3 + 0.02 * x - 0.01 * z)


def variants():
    """Name, options, what is changed in the parameters: rich cases of the penalties."""
    def columns(case, header, values):
        cells = read_parameters(case)
        case.table('parameters.csv', ('parameter', 'x', 'z', *header),
                   [(c['parameter'], c['x'], c['z'], *values(k, c)) for k, c in enumerate(cells)])

    def delays(case):
        design = rays(case, 10, 9, 8)
        names = list(dict.fromkeys(row[0] for row in design))
        case.table('design.csv', ('observation', 'parameter', 'coefficient'),
                   design + [[name, f'delay{k // 8}', 1.0] for k, name in enumerate(names) if k < 64])
        cells = read_parameters(case)
        case.table('parameters.csv', ('parameter', 'x', 'z', 'damp_weight'),
                   [(c['parameter'], c['x'], c['z'], 1) for c in cells] + [(f'delay{k}', '', '', 0) for k in range(8)])

    def regions(case):
        rays(case, 10, 9, 10)
        columns(case, ('region',), lambda k, c: ('left' if float(c['x']) < 5 else 'right',))

    def priors(case):
        rays(case, 10, 9, 10)
        columns(case, ('prior', 'prior_sigma', 'damp_weight'), lambda k, c: (0.5, 0.05 if k % 7 == 0 else '', 1))

    def scattered(case):
        rays(case, 10, 9, 10)
        chance = random.Random(4)
        cells = read_parameters(case)
        case.table('parameters.csv', ('parameter', 'x', 'z'),
                   [(c['parameter'], float(c['x']) + chance.uniform(-.3, .3), float(c['z']) + chance.uniform(-.3, .3)) for c in cells])

    def solid(case):
        rays(case, 12, 9, 10)
        cells = read_parameters(case)
        case.table('parameters.csv', ('parameter', 'x', 'y', 'z'),
                   [(c['parameter'], k % 4, k // 4 % 3, c['z']) for k, c in enumerate(cells)])

    def own(case):
        rays(case, 10, 9, 10)
        case.table('penalty.csv', ('row', 'parameter', 'coefficient'),
                   [(f'r{j}', f'c{j + i}', v) for j in range(89) for i, v in ((0, -1), (1, 1))])

    plain = lambda case: rays(case, 10, 9, 10)
    for prefer in ('smallest', 'flattest', 'smoothest'):
        yield f'{prefer}, delays without damping', ('--prefer', prefer), delays
        yield f'{prefer}, weighted priors', ('--prefer', prefer), priors
    for prefer in ('flattest', 'smoothest'):
        yield f'{prefer}, regions', ('--prefer', prefer), regions
        yield f'{prefer}, scattered points', ('--prefer', prefer), scattered
        yield f'{prefer}, three axes', ('--prefer', prefer), solid
        yield f'{prefer}, stretch', ('--prefer', prefer, '--stretch', 'x=3,z=0.5'), plain
        yield f'{prefer}, also-smallest', ('--prefer', prefer, '--also-smallest', '0.1'), plain
    yield 'own penalty', ('--prefer', 'own'), own


def engines_agree(options, build):
    case = Case()
    build(case)
    case.must('solve', '--engine', 'cholesky', '--damping', '4', '--sigma', 'none', *options)
    expected = estimates(case)
    for engine in (*DIRECT, *ITERATIVE):
        case.must('solve', '--engine', engine, '--damping', '4', '--sigma', 'none', '--overwrite', *options)
        agree(estimates(case), expected, 1e-9 if engine in DIRECT else 1e-6, engine)


for name_, options_, build_ in variants():
    add(f'all engines agree: {name_}', engines_agree, options_, build_)


@test('a basis that outgrows --memory: models by the recurrence, the same curve and choices, and it is said')
def _():
    case = Case()
    crosshole(case, 24, 22, 18)
    small = os.path.join(case.folder, 'small')
    for weighted in (False, True):
        if weighted:
            cells = read_parameters(case)
            case.table('parameters.csv', ('parameter', 'x', 'z', 'prior', 'prior_sigma', 'damp_weight'),
                       [(c['parameter'], c['x'], c['z'], 0.5, 0.1 if k % 9 == 0 else '', 1) for k, c in enumerate(cells)])
        options = ('--engine', 'lsqr', '--prefer', 'flattest', '--sigma', 'none', '--dampings', '0.3:300:12', '--overwrite')
        case.must('sweep', *options, codes=(0, 1))
        case.must('sweep', *options, '--memory', '1M', out=small, codes=(0, 1))
        matches(' '.join(case.summary(small)['warnings']), 'basis outgrew half of --memory')
        assert 'basis' not in ' '.join(case.summary()['warnings'])
        agree(estimates(case, small), estimates(case), 1e-5)
        pairs = [p for p in zip(case.rows('tradeoff.csv', small), case.rows('tradeoff.csv')) if all(r['converged'] == 'yes' for r in p)]
        assert len(pairs) > 5
        for a, b in pairs:
            for key in ('damping', 'misfit', 'size', 'chi_square'):
                near(float(a[key]), float(b[key]), 1e-5, what=f'{key} at {b["damping"]}')


def too_small(engine, command):
    case = Case()
    crosshole(case, 30, 30, 20)
    damping = () if command == 'sweep' else ('--damping', '5')
    done = case.run(command, '--engine', engine, '--memory', '5M', *damping)
    equal(done.returncode, 5)
    matches(done.stderr, r'needs [0-9.]+ MiB, --memory allows 5.0 MiB; .*(lsqr|iterative)')
    assert not os.path.exists(case.out)


for engine_ in DIRECT:
    add(f'{engine_}: what does not fit --memory is refused with what would, solve', too_small, engine_, 'solve')
    add(f'{engine_}: what does not fit --memory is refused with what would, sweep', too_small, engine_, 'sweep')


@test('auto and an iterative engine keep within a small --memory; standard deviations are then sampled')
def _():
    case = Case()
    crosshole(case, 30, 30, 20)
    for engine in ('auto', 'lsqr'):
        case.must('solve', '--engine', engine, '--memory', '5M', '--damping', '5', '--sigma', 'posterior', '--overwrite')
        equal(case.summary()['engine']['name'], 'lsqr')
        equal({row['sigma_kind'] for row in case.rows('parameters.csv')}, {'sampled'})


@test('--storage single: the same answer to single precision, by solve and sweep')
def _():
    case = Case()
    crosshole(case, 12, 10, 12)
    for command, options in (('solve', ('--damping', '3')), ('sweep', ())):
        found = []
        for storage in ('double', 'single'):
            case.must(command, '--engine', 'lsqr', '--prefer', 'flattest', '--storage', storage, '--overwrite', *options)
            found.append(estimates(case))
        agree(found[1], found[0], 1e-5)
        assert found[0] != found[1]


@test('effective parameters: the sum of the exact resolution, in the summary and in the variance factor')
def _():
    for engine in ('dense', 'cholesky', 'lsqr'):
        for prefer in ('smallest', 'flattest', 'smoothest'):
            case = Case()
            rays(case, 9, 8, 8)
            case.must('solve', '--engine', engine, '--prefer', prefer, '--damping', '4')
            summary = case.summary()
            trace = sum(float(row['resolution']) for row in case.rows('parameters.csv'))
            near(summary['damping']['effective_parameters'], trace, 1e-10)
            near(summary['fit']['variance_factor'], summary['fit']['chi_square'] / (64 + 11 - trace), 1e-9)


run()
