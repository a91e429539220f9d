# SPDX-License-Identifier: GPL-3.0-or-later
"""Whole processes: reading, from CSV to a solution or a trade-off, peak memory."""
import os

import generate
from measure import interleave, middle, run, say, spread
from sections_iterative import largest_singular, ray_file

import numpy as np


def table_file(place):
    """20 million nonzeros: n = 1e5, m = 48 000."""
    cells, count = ((60, 60), 3000) if place.quick else ((316, 316), 48000)
    return place.make(f'rays-2d-table-{count}.lwm', generate.rays, cells, count)


def ten_million(place):
    cells, count = ((60, 60), 2000) if place.quick else ((316, 316), 24000)
    return place.make(f'rays-2d-script-{count}.lwm', generate.rays, cells, count)


def read(place, figures):
    matrix = table_file(place)
    tool = place.tool('read')
    for order in ('ordered', 'shuffled'):
        folder = place.folder(matrix, f'{os.path.basename(matrix)[:-4]}-{order}', order)
        contenders = {'callbacks': [tool, folder, 'callbacks'], 'ours': [tool, folder, 'own', '1'], 'ours, 2': [tool, folder, 'own', '2']}
        results = interleave(contenders, 3)
        others = interleave({'R read.csv': ['Rscript', place.script('contender.R'), folder, 'usual'],
                             'R fread': ['Rscript', place.script('contender.R'), folder, 'fast'],
                             'Python csv': [place.script('contender.py'), 'read', folder]}, 1)
        rate = {k: r[0]['rows'] / middle(r, 'read_cpu') / 1e6 for k, r in {**results, **others}.items()}
        rate['ours, 2'] = results['ours, 2'][0]['rows'] / middle(results['ours, 2'], 'read_wall') / 1e6
        case = f'{results["ours"][0]["rows"] / 1e6:.1f} million rows, {order}'
        noise = spread(results['ours'], 'read_cpu')
        figures.add('our reading / libcsv callbacks only', case, rate['ours'], rate['callbacks'], 'M rows/s', rate['ours'] / rate['callbacks'],
                    None if place.quick else 0.3, False, noise)
        for name in others:
            figures.add(f'our reading / {name}', case, rate['ours'], rate[name], 'M rows/s', rate['ours'] / rate[name],
                        5 if name != 'R fread' and not place.quick else None, False, noise)
        figures.add('our reading, two threads, wall clock', case, rate['ours, 2'], None, 'M rows/s', rate['ours, 2'])
        if order == 'ordered':
            figures.curve('growth-rows', 'ours', results['ours'][0]['rows'], middle(results['ours'], 'read_cpu'))
            figures.curve('growth-rows', 'Python csv', others['Python csv'][0]['rows'], others['Python csv'][0]['read_cpu'])
    small = place.make('cross-40.lwm', generate.cross_hole, 40)
    for path in (small, ray_file(place, 10 ** 4)):
        folder = place.folder(path, os.path.basename(path)[:-4], 'ordered')
        results = interleave({'ours': [tool, folder, 'own', '1'], 'Python csv': [place.script('contender.py'), 'read', folder]}, 3)
        for name in results:
            figures.curve('growth-rows', name, results[name][0]['rows'], middle(results[name], 'read_cpu'))


def script(place, figures):
    matrix = ten_million(place)
    folder = place.folder(matrix, os.path.basename(matrix)[:-4], 'ordered')
    top = largest_singular(matrix)
    low, high, damping, out = repr(top * 0.01), repr(top), repr(top * 0.02), os.path.join(place.data, 'script-run')
    # SciPy's default tolerances leave an error of 4e-5 in this model; ours is asked to stay below 3e-5.
    solve = [place.program, 'solve', folder, '--engine', 'lsqr', '--tolerance', '3e-5', '--sigma', 'none', '--damping', damping, '--quiet', '--overwrite', '-o', out]
    sweep = [place.program, 'sweep', folder, '--engine', 'lsqr', '--sigma', 'none', '--dampings', f'{low}:{high}:50', '--criteria',
             'corner,discrepancy', '--models', 'chosen', '--quiet', '--overwrite', '-o', out + '-sweep']
    python = [place.script('contender.py'), 'script', folder, os.path.join(place.data, 'script.csv')]
    size = f'{generate.read_matrix(matrix)[0].nnz / 1e6:.1f} million nonzeros'
    dampings = [repr(float(x)) for x in np.geomspace(float(low), float(high), 50)]
    for name, many in (('solved parameters.csv', False), ('50-damping trade-off with models', True)):
        ours, theirs = (sweep, python + dampings) if many else (solve, python + [damping])
        say(f'  {name}')
        results = {'ours': [run(ours, (0, 1))], 'script': [run(theirs)]}
        results['ours'] += [run(ours, (0, 1)), run(ours, (0, 1))]
        results['script'] += [] if many else [run(theirs)]
        a, b = middle(results['ours'], 'process_wall'), middle(results['script'], 'process_wall')
        c, d = middle(results['ours'], 'process_cpu'), middle(results['script'], 'process_cpu')
        wanted = None if place.quick else 10 if many else 5
        figures.add(f'SciPy script / ours, CSV to {name}, wall clock', size, a, b, 's', b / a, wanted, False,
                    spread(results['ours'], 'process_wall'))
        figures.add(f'SciPy script / ours, CSV to {name}, processor time', size, c, d, 's', d / c)


def memory(place, figures):
    matrix = ten_million(place)
    folder = place.folder(matrix, os.path.basename(matrix)[:-4], 'ordered')
    packed = folder + '-packed'
    A = generate.read_matrix(matrix)[0]
    vectors = 8.0 * max(A.shape)
    damping = repr(0.02 * largest_singular(matrix))
    run([place.program, 'pack', folder, '-o', packed, '--quiet', '--overwrite'])

    def peak_of(command):
        """By way of `time`, a small process: that of a child of this one would count what this one holds."""
        note = os.path.join(place.data, 'peak')
        run(['/usr/bin/time', '-q', '-f', '%M', '-o', note, *command], (0, 1))
        with open(note) as file:
            return 1024.0 * int(file.read().split()[-1])

    idle = peak_of([place.program, '--version'])
    options = ['--engine', 'lsqr', '--sigma', 'none', '--damping', damping, '--quiet', '--overwrite', '-o', os.path.join(place.data, 'memory-run')]
    for name, source, wanted in (('packed problem', packed, 20), ('CSV', folder, 40)):
        peak = peak_of([place.program, 'solve', source, *options])
        each = (peak - idle - 12 * vectors) / A.nnz
        figures.add(f'peak memory of an iterative solve from a {name}, bytes a nonzero beyond 12 vectors', f'{A.nnz / 1e6:.1f} million nonzeros',
                    peak / 1e6, None, 'MB', each, wanted)


SECTIONS = {'read': read, 'script': script, 'memory': memory}
