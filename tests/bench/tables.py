# SPDX-License-Identifier: GPL-3.0-or-later
"""What was measured, as CSV, as Markdown table and as plots."""
import csv
import datetime
import glob
import os
import platform
import re
import shutil
import subprocess

import plot

COLUMNS = ['section', 'figure', 'case', 'ours', 'theirs', 'unit', 'value', 'wanted', 'met', 'spread', 'load', 'date', 'quick']


def short(value):
    return f'{value:.3g}' if abs(value) < 1000 else f'{value:.0f}'


class Figures:
    """The results of one section."""

    def __init__(self, place, section):
        self.place, self.section, self.rows, self.curves = place, section, [], []
        self.load = os.getloadavg()[0]

    def add(self, figure, case, ours, theirs, unit, value, wanted=None, most=True, spread=1.0):
        """wanted: a number that value is to be at most (most) or at least."""
        met = '' if wanted is None else 'met' if (value <= wanted if most else value >= wanted) else 'missed'
        sign = '' if wanted is None else ('at most ' if most else 'at least ') + f'{wanted:g}'
        row = [self.section, figure, case, short(ours), short(theirs) if theirs is not None else '', unit, short(value), sign,
               met, f'{spread:.2f}', f'{self.load:.1f}', datetime.date.today().isoformat(), 'quick' if self.place.quick else '']
        self.rows.append(row)
        self.keep()
        print(f'{figure}, {case}: {short(value)}' + (f' (wanted {sign}: {met})' if sign else ''), flush=True)

    def note(self, figure, text):
        self.rows.append([self.section, figure, text] + [''] * (len(COLUMNS) - 3))
        print(f'{figure}: {text}', flush=True)

    def curve(self, plot_name, series, x, y):
        self.curves.append([plot_name, series, f'{x:.6g}', f'{y:.6g}'])

    def keep(self):
        for kind, head, rows in (('figures', COLUMNS, self.rows), ('curves', ['plot', 'series', 'x', 'y'], self.curves)):
            if not rows and kind == 'curves':
                continue
            with open(os.path.join(self.place.data, f'{kind}-{self.section}.csv'), 'w', newline='') as file:
                csv.writer(file).writerows([head, *rows])


def collected(place, kind):
    rows = []
    for path in sorted(glob.glob(os.path.join(place.data, f'{kind}-*.csv'))):
        with open(path, newline='') as file:
            rows += list(csv.DictReader(file))
    return rows


def versions():
    found = [f'Python {platform.python_version()}']
    packages = ['libsuitesparse-dev', 'libopenblas-dev', 'libgsl-dev', 'libcsv-dev', 'python3-scipy', 'octave', 'r-base-core',
                'r-cran-data.table', 'gcc']
    for package in packages:
        answer = subprocess.run(['dpkg-query', '-W', '-f', '${Version}', package], capture_output=True, text=True)
        if answer.returncode == 0:
            found.append(f'{package.removeprefix("lib").removesuffix("-dev")} {answer.stdout.strip()}')
    return ', '.join(found)


def machine():
    model, memory = 'unknown', 0
    for line in open('/proc/cpuinfo'):
        if line.startswith('model name'):
            model = line.split(':', 1)[1].strip()
    for line in open('/proc/meminfo'):
        if line.startswith('MemTotal'):
            memory = int(line.split()[1]) / 1e6
    return f'{os.cpu_count()} processors ({model}), {memory:.0f} GB memory, {platform.system()} {platform.machine()}'


def table(rows):
    lines = ['| figure | case | ours | theirs | unit | ratio or value | wanted | | spread |', '|---|---|---|---|---|---|---|---|---|']
    for r in rows:
        words = [r['figure'], r['case'], r['ours'], r['theirs'], r['unit'], r['value'], r['wanted'], r['met'], r['spread']]
        lines.append('| ' + ' | '.join(word.replace('|', '/') for word in words) + ' |')
    return '\n'.join(lines)


def summarize(place):
    rows = collected(place, 'figures')
    with open(os.path.join(place.data, 'results.csv'), 'w', newline='') as file:
        writer = csv.DictWriter(file, COLUMNS)
        writer.writeheader()
        writer.writerows(rows)
    measured = [r for r in rows if r['section'] != 'nist']
    dates = sorted({r['date'] for r in measured if r['date']})
    loads = [float(r['load']) for r in measured if r['load']]
    quick = any(r['quick'] for r in measured)
    head = f'Measured {" to ".join(sorted({dates[0], dates[-1]})) if dates else "never"} on {machine()}; {versions()}.'
    if loads and max(loads) > 0.5:
        head += f' Load of the machine while measuring: {min(loads):.1f} to {max(loads):.1f}.'
    if quick:
        head += ' Some sections ran with `--quick`, at smaller sizes.'
    with open(os.path.join(place.data, 'table.md'), 'w') as file:
        file.write(head + '\n\n' + table(measured) + '\n')
    curves = collected(place, 'curves')
    for name in sorted({c['plot'] for c in curves}):
        plot.write(os.path.join(place.data, f'{name}.svg'), name, [c for c in curves if c['plot'] == name])
    print(f'results: {place.data}/results.csv, table.md and *.svg')


def insert(path, mark, text):
    with open(path) as file:
        page = file.read()
    pattern = f'(<!-- {mark} -->\n).*?(<!-- end of {mark} -->)'
    page, count = re.subn(pattern, lambda m: m.group(1) + text.rstrip() + '\n' + m.group(2), page, flags=re.S)
    if count:
        with open(path, 'w') as file:
            file.write(page)


def publish(place):
    doc = os.path.join(place.source, 'doc')
    with open(os.path.join(place.data, 'table.md')) as file:
        insert(os.path.join(doc, 'benchmarks.md'), 'table', file.read())
    accuracy = os.path.join(place.data, 'accuracy.md')
    if os.path.exists(accuracy):
        with open(accuracy) as file:
            insert(os.path.join(doc, 'accuracy.md'), 'table', file.read())
    for path in glob.glob(os.path.join(place.data, 'growth-*.svg')):
        shutil.copy(path, doc)
