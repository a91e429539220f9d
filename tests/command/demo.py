#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""The demo: its data are made by the script beside them byte for byte, and the runs find what was planted."""
import filecmp
import os
import subprocess
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), 'lib'))
from case import DEMO, Case, scratch
from tap import equal, run, test


@test('data-demo/make-data makes the same bytes')
def _():
    folder = scratch()
    subprocess.run([sys.executable, os.path.join(DEMO, 'make-data'), folder], check=True, capture_output=True)
    made = sorted(os.path.relpath(os.path.join(where, n), folder) for where, _, names in os.walk(folder) for n in names)
    assert len(made) >= 12, made
    for name in made:
        assert filecmp.cmp(os.path.join(folder, name), os.path.join(DEMO, name), shallow=False), name
    for problem in {name.split(os.sep)[0] for name in made}:
        equal(sorted(os.listdir(os.path.join(DEMO, problem))), sorted(os.listdir(os.path.join(folder, problem))), problem)


@test('crest 2025 is accepted; in crest 2026 the planted reading L37 is found')
def _():
    case = Case().copy_of(os.path.join(DEMO, 'crest-2025'))
    case.must('solve', '--search-outliers')
    equal(case.summary()['fit']['rejected'], False)
    case = Case().copy_of(os.path.join(DEMO, 'crest-2026'))
    case.must('solve', '--search-outliers')
    steps = case.rows('outliers.csv')
    equal(steps[0]['observation'], 'L37')
    equal(list(steps[0])[:6], ['step', 'observation', 'action', 'statistic', 'critical', 'reason'])
    assert abs(float(steps[0]['statistic'])) > float(steps[0]['critical']), steps[0]
    equal(case.summary()['fit']['rejected'], False)


@test('plane: ellipses; cross-hole: a trade-off with a choice')
def _():
    case = Case().copy_of(os.path.join(DEMO, 'plane'))
    case.must('solve')
    assert len(case.rows('ellipses.csv')) >= 6
    case = Case().copy_of(os.path.join(DEMO, 'cross-hole'))
    case.must('sweep', codes=(0, 1))
    assert any(c['damping'] and not c['warning'] for c in case.summary()['choices']), case.summary()['choices']
    assert case.summary()['damping']['value'] > 0


run()
