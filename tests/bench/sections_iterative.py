# SPDX-License-Identifier: GPL-3.0-or-later
"""Steps, sweeps, smoothing and bounds: kernels of the iterative side."""
import numpy as np
import scipy.sparse as sp

import generate
from measure import interleave, middle, say, spread

RAYS = {10 ** 4: ((100, 100), 6000, 40), 10 ** 5: ((316, 316), 30000, 10), 10 ** 6: ((1000, 1000), 20000, 6)}


def ray_file(place, n, shuffled=False, deep=False):
    cells, count, _ = RAYS[n]
    if deep:
        cells = (round(n ** (1 / 3)),) * 3
    name = f'rays-{len(cells)}d-{n}{"-shuffled" if shuffled else ""}.lwm'
    return place.make(name, generate.rays, cells, count, shuffled)


def largest_singular(path):
    """sigma_1 of the whitened matrix, by power iteration to a percent or so."""
    A, _, sigma = generate.read_matrix(path)
    A = sp.diags(1 / sigma) @ A.tocsr()
    v = np.ones(A.shape[1])
    for _ in range(12):
        v = A.T @ (A @ (v / np.linalg.norm(v)))
    return float(np.sqrt(np.linalg.norm(v)))


def step(place, figures):
    sizes = [10 ** 4] if place.quick else list(RAYS)
    cases = [(n, False, False) for n in sizes] + [(sizes[min(1, len(sizes) - 1)], True, False), (sizes[min(1, len(sizes) - 1)], False, True)]
    for n, shuffled, deep in cases:
        path = ray_file(place, n, shuffled, deep)
        steps = str(RAYS[n][2])
        tool = place.tool('step')
        results = interleave({'fused': [tool, path, 'fused', '1', steps], 'single': [tool, path, 'single', '1', steps],
                              'two passes': [tool, path, 'same', '1', steps], 'plain': [tool, path, 'plain', '1', steps],
                              'fused, 2': [tool, path, 'fused', '2', steps], 'single, 2': [tool, path, 'single', '2', steps],
                              'scipy': [place.script('contender.py'), 'step', path, steps]},
                             5 if n == 10 ** 4 and not place.quick else 3)
        case = f'n = {n:.0e}, {"3-D" if deep else "2-D"}{", shuffled" if shuffled else ""}'
        cpu = {name: middle(r, 'step_cpu') for name, r in results.items()}
        wall = {name: middle(r, 'step_wall') for name, r in results.items()}
        noise = max(spread(r, 'step_cpu') for r in results.values())
        ms = 1e3
        wanted = None if shuffled or deep else 3
        figures.add('SciPy lsqr step / ours, one thread', case, cpu['fused'] * ms, cpu['scipy'] * ms, 'ms', cpu['scipy'] / cpu['fused'], spread=noise)
        figures.add('SciPy lsqr step / ours, two threads', case, wall['fused, 2'] * ms, wall['scipy'] * ms, 'ms',
                    wall['scipy'] / wall['fused, 2'], wanted, False, spread(results['fused, 2'], 'step_wall'))
        figures.add('SciPy lsqr step / ours single, two threads', case, wall['single, 2'] * ms, wall['scipy'] * ms, 'ms',
                    wall['scipy'] / wall['single, 2'], wanted and 4.5, False, spread(results['single, 2'], 'step_wall'))
        figures.add('fused step / own two-pass step', case, cpu['fused'] * ms, cpu['plain'] * ms, 'ms', cpu['fused'] / cpu['plain'],
                    0.85 if wanted else None, True, noise)
        figures.add('fused single step / own two-pass step', case, cpu['single'] * ms, cpu['plain'] * ms, 'ms',
                    cpu['single'] / cpu['plain'], 0.60 if wanted else None, True, noise)
        figures.add('fused step / two passes over its own layout', case, cpu['fused'] * ms, cpu['two passes'] * ms, 'ms',
                    cpu['fused'] / cpu['two passes'], None, True, noise)


def threads(place, figures):
    n = 10 ** 4 if place.quick else 10 ** 6
    path, tool, steps = ray_file(place, n), place.tool('step'), str(RAYS[n][2] * 2)
    results = interleave({'1': [tool, path, 'fused', '1', steps], '2': [tool, path, 'fused', '2', steps]}, 7)
    one, two = (middle(results[k], 'step_wall') for k in '12')
    figures.add('one thread / two threads, step', f'n = {n:.0e}', two * 1e3, one * 1e3, 'ms', one / two, 1.8, False,
                spread(results['2'], 'step_wall'))
    one, two = (middle(results[k], 'step_cpu') for k in '12')
    figures.add('processor time of two threads / of one, step (what threads cost)', f'n = {n:.0e}', two * 1e3, one * 1e3, 'ms', two / one,
                None, True, spread(results['2'], 'step_cpu'))


def grid(path, decades=2.5, count=50):
    top = largest_singular(path)
    return repr(top * 10 ** -decades), repr(top), str(count)


def sweep(place, figures):
    side = 40 if place.quick else 100
    path = place.make(f'cross-{side}.lwm', generate.cross_hole, side)
    span, tool = grid(path), place.tool('sweep')
    probe = interleave({'sweep': [tool, path, 'smallest', *span, '0', 'sweep']}, 1)['sweep']
    traced = interleave({'sweep': [tool, path, 'smallest', *span, '1', 'sweep']}, 1)['sweep']
    alone = [repr(probe[0]['choice'])] * 2
    alone_traced = [repr(traced[0]['choice'])] * 2
    results = interleave({'sweep': [tool, path, 'smallest', *span, '0', 'sweep'], 'trace': [tool, path, 'smallest', *span, '1', 'sweep'],
                          'solve': [tool, path, 'smallest', *alone, '1', '0', 'solve'],
                          'solve (traced choice)': [tool, path, 'smallest', *alone_traced, '1', '0', 'solve'],
                          'separate': [tool, path, 'smallest', *span, '0', 'separate']}, 3 if place.quick else 5)
    case = f'cross-hole, n = {side * side}, 50 dampings'
    cpu = {name: middle(r, name + '_cpu') for name, r in (('sweep', results['sweep']), ('solve', results['solve']), ('separate', results['separate']))}
    cpu['trace'] = middle(results['trace'], 'sweep_cpu')
    cpu['traced solve'] = middle(results['solve (traced choice)'], 'solve_cpu')
    noise = max(spread(results['sweep'], 'sweep_cpu'), spread(results['solve'], 'solve_cpu'))
    figures.add('sweep / one solve at its smallest choice', case, cpu['sweep'], cpu['solve'], 's', cpu['sweep'] / cpu['solve'], 1.3, True, noise)
    figures.add('sweep with trace / one solve at its smallest choice', case, cpu['trace'], cpu['traced solve'], 's',
                cpu['trace'] / cpu['traced solve'], 2.2, True, noise)
    figures.add('separate solves to the same error bounds / sweep', case + f' ({probe[0]["steps"]:.0f} steps)', cpu['sweep'], cpu['separate'],
                's', cpu['separate'] / cpu['sweep'], 7, False, noise)


def loop(place, figures):
    cases = [(place.make('cross-40.lwm', generate.cross_hole, 40), 1600, None)] if place.quick else \
        [(place.make('cross-70.lwm', generate.cross_hole, 70), 4900, 10), (ray_file(place, 10 ** 5), 10 ** 5, 15)]
    for path, n, wanted in cases:
        low, high, count = grid(path, 2.5 if n < 10 ** 5 else 2.0)
        dampings = [repr(float(x)) for x in np.geomspace(float(low), float(high), int(count))]
        results = interleave({'sweep': [place.tool('sweep'), path, 'smallest', low, high, count, '0', 'sweep'],
                              'scipy': [place.script('contender.py'), 'loop', path, *dampings]}, 3 if n < 10 ** 5 else 1)
        ours, theirs = middle(results['sweep'], 'with_model_cpu'), middle(results['scipy'], 'loop_cpu')
        figures.add('50 SciPy lsqr solves / our sweep, processor time', f'n = {n}, {results["sweep"][0]["steps"]:.0f} steps to '
                    f'{results["scipy"][0]["steps"]:.0f}', ours, theirs, 's', theirs / ours, wanted, False, spread(results['sweep'], 'with_model_cpu'))


def smoothing(place, figures):
    cases = [(place.make('rays-every-1600.lwm', generate.rays, (40, 40), 1500, False, True), 1600, None, None)] if place.quick else \
        [(place.make('rays-every-10000.lwm', generate.rays, (100, 100), 6000, False, True), 10 ** 4, 20, 10),
         (place.make('rays-every-100000.lwm', generate.rays, (316, 316), 10000, False, True), 10 ** 5, 40, 10)]
    for path, n, wanted, share in cases:
        top = largest_singular(path)
        low, high, count, tool = repr(top * 0.5), repr(top * 500), '50', place.tool('sweep')
        results = interleave({'sweep': [tool, path, 'smoothest', low, high, count, '0', 'sweep'],
                              'stacked': [tool, path, 'smoothest', low, high, count, '0', 'stacked']}, 3 if n < 10 ** 5 else 1)
        solved = results['stacked'][0]['solved']
        if solved == 0:
            figures.note('smoothing', 'no choice within the grid')
            continue
        stacked = 50 * middle(results['stacked'], 'stacked_cpu') / solved
        ours = middle(results['sweep'], 'sweep_cpu')
        case = f'n = {n}, 50 dampings, {results["sweep"][0]["steps"]:.0f} steps against {results["stacked"][0]["steps"] / solved:.0f} each'
        figures.add('stacking per damping / smoothing sweep', case, ours, stacked, 's', stacked / ours, wanted, False,
                    spread(results['sweep'], 'sweep_cpu'))
        factor = middle(results['sweep'], 'decompose_cpu')
        figures.add('standard form and factor, percent of the sweep', case, factor, ours, 's', 100 * factor / ours, share, True)


def bounded(place, figures):
    n = 10 ** 4 if place.quick else 10 ** 6
    path = ray_file(place, n)
    damping = 0.02 * largest_singular(path)
    result = interleave({'bounded': [place.tool('bounded'), path, repr(damping), '2']}, 1)['bounded'][0]
    case = f'n = {n:.0e}, {result["at_bound"]:.0f} cells at a bound, {result["products"]:.0f} products'
    figures.add('bounded solve, seconds', case, result['bounded_wall'], None, 's', result['bounded_wall'])
    figures.add('bounded solve, projected gradient / gradient at the start', case, result['optimality'], None, '', result['optimality'], 1e-8)


def growth(place, figures):
    say('  steps against nonzeros and observations')
    tool = place.tool('step')
    for n in [10 ** 4] if place.quick else list(RAYS):
        path = ray_file(place, n)
        nonzeros = generate.read_matrix(path)[0].nnz
        results = interleave({'ours': [tool, path, 'fused', '1', '6'], 'single': [tool, path, 'single', '1', '6'],
                              'SciPy lsqr': [place.script('contender.py'), 'step', path, '6']}, 3)
        for name, label in (('ours', 'ours'), ('single', 'ours, single storage'), ('SciPy lsqr', 'SciPy lsqr')):
            figures.curve('growth-nonzeros', label, nonzeros, middle(results[name], 'step_cpu'))
    for m in (1000, 3000, 10000) if place.quick else (1000, 3000, 10000, 30000, 100000):
        path = place.make(f'rays-2d-m{m}.lwm', generate.rays, (100, 100), m)
        results = interleave({'ours': [tool, path, 'fused', '1', '10'], 'plain': [tool, path, 'plain', '1', '10']}, 3)
        figures.curve('growth-observations', 'ours', m, middle(results['ours'], 'step_cpu'))
        figures.curve('growth-observations', 'ours, two passes', m, middle(results['plain'], 'step_cpu'))
    path = place.make('cross-40.lwm', generate.cross_hole, 40)
    top = largest_singular(path)
    for count in (3, 10, 30, 100) if place.quick else (3, 10, 30, 100, 300, 1000):
        dampings = [repr(float(x)) for x in np.geomspace(top * 10 ** -2.5, top, count)]
        contenders = {'ours': [place.tool('sweep'), path, 'smallest', dampings[0], dampings[-1], str(count), '0', 'sweep']}
        if count <= 100:
            contenders['SciPy lsqr in a loop'] = [place.script('contender.py'), 'loop', path, *dampings]
        results = interleave(contenders, 3)
        figures.curve('growth-dampings', 'ours', count, middle(results['ours'], 'sweep_cpu'))
        if count <= 100:
            figures.curve('growth-dampings', 'SciPy lsqr in a loop', count, middle(results['SciPy lsqr in a loop'], 'loop_cpu'))


SECTIONS = {'step': step, 'threads': threads, 'sweep': sweep, 'loop': loop, 'smoothing': smoothing, 'bounded': bounded, 'growth': growth}
