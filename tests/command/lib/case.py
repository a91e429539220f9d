# SPDX-License-Identifier: GPL-3.0-or-later
"""A problem folder in a scratch place, the program run on it, and what it wrote read back."""
import atexit
import csv
import json
import os
import shutil
import subprocess
import tempfile

PROGRAM = os.environ.get('LEASTWISE', 'leastwise')
SOURCE = os.environ.get('LW_SOURCE') or os.path.abspath(os.path.join(os.path.dirname(__file__), '..', '..', '..'))
BUILD = os.environ.get('LW_BUILD', os.path.dirname(os.path.abspath(PROGRAM)))
DEMO = os.path.join(SOURCE, 'data-demo')
REFERENCE = os.path.join(SOURCE, 'tests', 'reference')
TIMEOUT = 300
ENGINES = ('dense', 'cholesky', 'qr', 'lsqr', 'cgls', 'lsmr')
DESIGN = ('observation', 'parameter', 'coefficient')

_scratch = tempfile.mkdtemp(prefix='leastwise-test-')
os.chmod(_scratch, 0o755)
_count = 0


@atexit.register
def _clean():
    shutil.rmtree(_scratch, ignore_errors=True)


def scratch(name=''):
    """A new empty folder that goes away at the end."""
    global _count
    _count += 1
    path = os.path.join(_scratch, f'{_count}{name}')
    os.mkdir(path)
    return path


def sanitized():
    """Whether the program is built with the address sanitizer."""
    with open(shutil.which(PROGRAM) or PROGRAM, 'rb') as file:
        return b'__asan_init' in file.read()


def text_of(value):
    return value if isinstance(value, str) else repr(value)


def leastwise(*words, **more):
    """Runs the program with these words; a crash (a signal, a sanitizer's report) is always a failed test."""
    more.setdefault('timeout', TIMEOUT)
    done = subprocess.run([PROGRAM, *words], capture_output=True, text=True, errors='surrogateescape', **more)
    assert done.returncode >= 0, f'{" ".join(words)}: killed by signal {-done.returncode}: {done.stderr[-600:]}'
    for mark in ('ERROR: AddressSanitizer', 'ERROR: LeakSanitizer', 'runtime error:'):
        assert mark not in done.stderr, f'{" ".join(words)}: {done.stderr[-3000:]}'
    return done


def read_csv(path):
    with open(path, newline='', encoding='utf-8') as file:
        return list(csv.DictReader(line for line in file if not line.startswith('#')))


class Case:
    """self.problem is the problem folder, self.out the run folder; `folder` beside them is otherwise empty."""

    def __init__(self, **files):
        self.folder = scratch()
        self.problem = os.path.join(self.folder, 'problem')
        os.mkdir(self.problem)
        self.out = os.path.join(self.folder, 'out')
        for name, content in files.items():
            self.put(name + '.csv', content)

    def path(self, name):
        return os.path.join(self.problem, name)

    def put(self, name, content):
        """content: the bytes or the text as it is."""
        with open(self.path(name), 'wb') as file:
            file.write(content if isinstance(content, bytes) else content.encode())
        return self

    def table(self, name, header, rows):
        """content: a header and rows of values; numbers are written with all their digits."""
        lines = [','.join(header)] + [','.join('' if v is None else text_of(v) for v in row) for row in rows]
        return self.put(name, '\n'.join(lines) + '\n')

    def copy_of(self, folder):
        for name in os.listdir(folder):
            shutil.copy(os.path.join(folder, name), self.path(name))
            os.chmod(self.path(name), 0o644)
        return self

    def run(self, command, *options, out=None, **more):
        words = [command, self.problem, *options]
        if command not in ('inspect',):
            words += ['--out', out or self.out]
        return leastwise(*words, **more)

    def must(self, command, *options, codes=(0,), out=None, **more):
        done = self.run(command, *options, out=out, **more)
        assert done.returncode in codes, f'{command} {" ".join(options)}: exit {done.returncode}, expected {codes}: {done.stderr[-1200:]}'
        return done

    def left(self):
        """What lies beside the problem folder."""
        return sorted(set(os.listdir(self.folder)) - {'problem'})

    def file(self, name, out=None):
        with open(os.path.join(out or self.out, name), 'rb') as file:
            return file.read()

    def rows(self, name, out=None):
        return read_csv(os.path.join(out or self.out, name))

    def keyed(self, name, key, out=None):
        return {row[key]: row for row in self.rows(name, out)}

    def parameters(self, out=None):
        return self.keyed('parameters.csv', 'parameter', out)

    def residuals(self, out=None):
        return self.keyed('residuals.csv', 'observation', out)

    def summary(self, out=None):
        return json.loads(self.file('summary.json', out))


def small():
    """Four readings of two unknowns."""
    return {'design': 'observation,parameter,coefficient\na,x,1\nb,x,1\nb,y,1\nc,y,1\nd,x,2\n',
            'observations': 'observation,value,sigma\na,1,0.1\nb,3,0.1\nc,2.1,0.1\nd,2.2,0.2\n'}


def crosshole(case, nx, nz, shots, noise=0.01, seed=1, coordinates=True):
    """Straight rays between two boreholes through nx by nz unit cells; times of an invented slowness with noise.
    Returns the rows of the design."""
    import math
    import random
    chance = random.Random(seed)
    depth = [0.37 + (nz - 0.78) * k / (shots - 1) for k in range(shots)]
    design, observations = [], []
    slow = [0.5 + 0.05 * math.exp(-(((i + 0.5) - nx * 0.6) ** 2 + ((k + 0.5) - nz * 0.4) ** 2) / (nx * 0.15) ** 2)
            for k in range(nz) for i in range(nx)]
    for a in depth:
        for b in depth:
            b += 0.013
            cuts = {0.0, 1.0} | {i / nx for i in range(1, nx)}
            cuts |= {t for t in ((k - a) / (b - a) for k in range(nz + 1)) if 0 < t < 1}
            cuts = sorted(cuts)
            name, time = f't{len(observations)}', 0.0
            for s, t in zip(cuts, cuts[1:]):
                cell = min(int((s + t) / 2 * nx), nx - 1) + nx * min(max(int(a + (s + t) / 2 * (b - a)), 0), nz - 1)
                length = (t - s) * math.hypot(nx, b - a)
                if length > 1e-12:
                    design.append([name, f'c{cell}', length])
                    time += length * slow[cell]
            observations.append([name, time])
    sums = {}
    for name, cell, length in design:  # a cell that a ray touches in two pieces has one coefficient
        sums[name, cell] = sums.get((name, cell), 0.0) + length
    design = [[name, cell, length] for (name, cell), length in sums.items()]
    sigma = noise * sum(v for _, v in observations) / len(observations)
    case.table('design.csv', DESIGN, design)
    case.table('observations.csv', ('observation', 'value', 'sigma'),
               [(n, v + sigma * chance.gauss(0, 1), sigma) for n, v in observations])
    cells = [(f'c{i + nx * k}', i + 0.5, k + 0.5) for k in range(nz) for i in range(nx)]
    if coordinates:
        case.table('parameters.csv', ('parameter', 'x', 'z'), cells)
    else:
        case.table('parameters.csv', ('parameter',), [c[:1] for c in cells])
    return design


def levelling(case, nx, ny, seed=1, noise=0.001):
    """A levelling net over nx by ny points, the first held; height differences of invented heights with noise."""
    import random
    chance = random.Random(seed)
    height = [100 + chance.uniform(0, 20) for _ in range(nx * ny)]
    lines = [(i + nx * k, i + 1 + nx * k) for k in range(ny) for i in range(nx - 1)]
    lines += [(i + nx * k, i + nx * (k + 1)) for k in range(ny - 1) for i in range(nx)]
    lines += [(i + nx * k, i + 1 + nx * (k + 1)) for k in range(ny - 1) for i in range(nx - 1)]
    design = [row for k, (a, b) in enumerate(lines) for row in ((f'o{k}', f'p{a}', -1), (f'o{k}', f'p{b}', 1))]
    case.table('design.csv', DESIGN, design)
    case.table('observations.csv', ('observation', 'value', 'sigma'),
               [(f'o{k}', round(height[b] - height[a] + noise * chance.gauss(0, 1), 5), noise) for k, (a, b) in enumerate(lines)])
    case.table('parameters.csv', ('parameter', 'prior', 'fixed'),
               [(f'p{j}', round(h, 1), repr(h) if j == 0 else '') for j, h in enumerate(height)])
    return design
