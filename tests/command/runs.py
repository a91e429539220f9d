#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""The run folder: what is in it, that it appears whole, that nothing foreign is touched, exit statuses and the terminal."""
import json
import math
import os
import pty
import re
import select
import signal
import subprocess
import sys
import time

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), 'lib'))
from case import DEMO, DESIGN, PROGRAM, Case, crosshole, leastwise, levelling, scratch, small
from tap import Skip, add, equal, matches, near, run, test

PARAMETERS = 'parameter,estimate,sigma,sigma_kind,interval_low,interval_high,resolution,hits,coverage,at_bound'
RESIDUALS = ('observation,value,sigma,predicted,predicted_sigma,residual,redundancy,standardized,detectable,bias_ratio,'
             'error_estimate,largest_shift,shifted_parameter,weight,flag')
TRADEOFF = 'damping,misfit,size,chi_square,effective_parameters,gcv,risk,curvature,error_bound,converged'
SUMMARY = {'leastwise': str, 'command': str, 'objective': str, 'units': dict, 'seed': int,
           'sizes': {'observations', 'parameters', 'nonzeros', 'rank', 'degrees_of_freedom'},
           'engine': {'name', 'why', 'steps', 'stop_reason', 'error_bound', 'rcond', 'sigma_error'},
           'damping': {'value', 'chosen_by', 'prefer', 'effective_parameters'},
           'fit': {'chi_square', 'rms', 'variance_reduction', 'variance_factor', 'variance', 'probability', 'rejected'},
           'choices': list, 'warnings': list, 'inputs': list, 'seconds': {'read', 'solve', 'certainty', 'write'}}


def header(case, name):
    return case.file(name).decode().split('\n')[0]


def check_summary(summary):
    for key, kind in SUMMARY.items():
        assert key in summary, f'no key {key}'
        if isinstance(kind, set):
            equal(kind - set(summary[key]), set(), key)
        else:
            assert isinstance(summary[key], kind), f'{key}: {summary[key]!r}'


@test('solve writes the columns of the contract and a summary with every key')
def _():
    case = Case(**small())
    case.must('solve')
    equal(sorted(os.listdir(case.out)), ['parameters.csv', 'report.html', 'residuals.csv', 'summary.json'])
    assert header(case, 'parameters.csv').startswith(PARAMETERS), header(case, 'parameters.csv')
    assert header(case, 'residuals.csv').startswith(RESIDUALS), header(case, 'residuals.csv')
    check_summary(case.summary())


@test('summary: what it says of the input and of the run')
def _():
    import hashlib
    case = Case(**small())
    case.must('solve', '--value-unit', 's', '--parameter-unit', 's/m', '--seed', '12')
    summary = case.summary()
    equal(summary['units'], {'value': 's', 'parameter': 's/m'})
    equal(summary['seed'], 12)
    equal(summary['command'].split()[:2], ['leastwise', 'solve'])
    matches(summary['objective'], 'residual = predicted - observed')
    matches(summary['objective'], r'lambda\^2')
    for entry in summary['inputs']:
        with open(entry['file'], 'rb') as file:
            data = file.read()
        equal((entry['bytes'], entry['sha256']), (len(data), hashlib.sha256(data).hexdigest()), entry['file'])
    equal({os.path.basename(e['file']) for e in summary['inputs']}, {'design.csv', 'observations.csv'})
    equal(summary['sizes'], {'observations': 4, 'parameters': 2, 'nonzeros': 5, 'rank': 2, 'degrees_of_freedom': 2})
    equal(summary['damping']['value'], None)
    equal(summary['damping']['chosen_by'], 'none')
    assert all(v is None or v >= 0 for v in summary['seconds'].values())


@test('sweep writes tradeoff.csv, models.csv and the run of the chosen damping')
def _():
    case = Case()
    crosshole(case, 6, 7, 8)
    case.must('sweep', '--dampings', '0.01:10:13', codes=(0, 1))
    equal(header(case, 'tradeoff.csv'), TRADEOFF)
    curve = case.rows('tradeoff.csv')
    equal(len(curve), 13)
    dampings = sorted(float(r['damping']) for r in curve)
    for k, damping in enumerate(dampings):
        near(damping, 0.01 * 1000 ** (k / 12), 1e-14)
    models = case.rows('models.csv')
    equal([r['parameter'] for r in models], [r['parameter'] for r in case.rows('parameters.csv')])
    equal(list(models[0])[1:], [r['damping'] for r in curve])
    summary = case.summary()
    check_summary(summary)
    for choice in summary['choices']:
        equal(set(choice), {'criterion', 'damping', 'from', 'to', 'warning'})
    equal([c['criterion'] for c in summary['choices']], ['corner', 'gcv', 'discrepancy', 'risk'])
    m = len(case.rows('residuals.csv'))
    for r in curve:
        misfit, effective = float(r['misfit']), float(r['effective_parameters'])
        near(r['gcv'], misfit ** 2 / (m - effective) ** 2, 1e-9, what='gcv')
        near(r['risk'], misfit ** 2 - m + 2 * effective, 1e-9, 1e-9, what='risk')
        near(r['chi_square'], misfit ** 2, 1e-9, what='chi_square')
    ordered = sorted(curve, key=lambda r: float(r['damping']))
    for a, b in zip(ordered, ordered[1:]):
        assert float(a['misfit']) <= float(b['misfit']) * (1 + 1e-12) and float(a['size']) >= float(b['size']) * (1 - 1e-12)


@test('the chosen model of a sweep is that of solve with the same damping')
def _():
    case = Case()
    crosshole(case, 6, 7, 8)
    case.must('sweep', codes=(0, 1))
    chosen = case.summary()['damping']
    out = os.path.join(case.folder, 'solve')
    case.must('solve', '--damping', repr(chosen['value']), '--engine', 'dense', out=out)
    for a, b in zip(case.rows('parameters.csv'), case.rows('parameters.csv', out)):
        near(a['estimate'], b['estimate'], 1e-9, 1e-12, a['parameter'])
    out = os.path.join(case.folder, 'chosen')
    case.must('solve', '--damping', chosen['chosen_by'], out=out)
    near(case.summary(out)['damping']['value'], chosen['value'], 1e-6)
    equal(case.summary(out)['damping']['chosen_by'], chosen['chosen_by'])


@test('--models all, chosen and none')
def _():
    case = Case()
    crosshole(case, 5, 5, 7)
    for which in ('all', 'chosen', 'none'):
        out = os.path.join(case.folder, which)
        case.must('sweep', '--dampings', '0.1,1,10', '--models', which, codes=(0, 1), out=out)
        if which == 'none':
            assert not os.path.exists(os.path.join(out, 'models.csv'))
            continue
        models = case.rows('models.csv', out)
        equal(len(models[0]), 4 if which == 'all' else 2, which)
        if which == 'chosen':
            for a, b in zip(models, case.rows('parameters.csv', out)):
                equal(list(a.values())[1], b['estimate'])


@test('a comma list of dampings, of any order and of one')
def _():
    case = Case()
    crosshole(case, 5, 5, 7)
    case.must('sweep', '--dampings', '3,0.5,1.25', codes=(0, 1))
    equal({float(r['damping']) for r in case.rows('tradeoff.csv')}, {3.0, 0.5, 1.25})
    case.must('sweep', '--dampings', '2', '--overwrite', codes=(0, 1))
    equal([float(r['damping']) for r in case.rows('tradeoff.csv')], [2.0])


@test('no corner: sweep says so, solve --damping corner exits 4 and writes nothing')
def _():
    case = Case()
    case.table('design.csv', DESIGN, [(f'o{i}', f'p{i}', 1) for i in range(6)])
    case.table('observations.csv', ('observation', 'value'), [(f'o{i}', v) for i, v in enumerate([3, -1, 2, 0.5, 1, -2])])
    case.must('sweep', '--dampings', '1e-3:1e3:61', codes=(0, 1))
    choices = {c['criterion']: c for c in case.summary()['choices']}
    equal(choices['corner']['damping'], None)
    assert choices['corner']['warning'] and choices['gcv']['warning'], choices
    done = case.run('solve', '--damping', 'corner', out=os.path.join(case.folder, 'corner'))
    equal(done.returncode, 4, done.stderr)
    matches(done.stderr, 'corner')
    equal(case.left(), ['out'])


@test('rank defect: exit 4, the parameters are named, nothing is written')
def _():
    case = Case()
    levelling(case, 4, 3)
    case.table('parameters.csv', ('parameter',), [(f'p{j}',) for j in range(12)])
    done = case.run('solve')
    equal(done.returncode, 4)
    matches(done.stderr, "'p0'")
    matches(done.stderr, 'rank defect 1')
    equal(case.left(), [])
    case = Case(design='observation,parameter,coefficient\na,x,1\nb,x,2\n', observations='observation,value\na,1\nb,2\n',
                parameters='parameter\nx\nlonely\n')
    done = case.run('solve')
    equal(done.returncode, 4)
    matches(done.stderr, "'?lonely")
    assert "'x'" not in done.stderr, done.stderr
    equal(case.left(), [])
    case = Case(design='observation,parameter,coefficient\na,x,1\na,y,2\nb,x,2\nb,y,4\nc,x,3\nc,y,6\nc,z,1\n', observations='observation,value\na,1\nb,2\nc,3\n')
    done = case.run('solve')
    equal(done.returncode, 4)
    matches(done.stderr, "'x'.*'y'")
    assert "'z'" not in done.stderr, done.stderr


@test('contradictory conditions: exit 4, named')
def _():
    case = Case(**small(), conditions='condition,parameter,coefficient,value\none,x,1,1\ntwo,x,2,3\n')
    done = case.run('solve')
    equal(done.returncode, 4, done.stderr)
    matches(done.stderr, "'?(one|two)")
    equal(case.left(), [])


@test('not converged: exit 1, the run is written and says so')
def _():
    case = Case()
    crosshole(case, 12, 12, 14)
    for engine in ('lsqr', 'cgls', 'lsmr'):
        done = case.must('solve', '--engine', engine, '--damping', '0.01', '--steps', '3', '--overwrite', codes=(1,))
        matches(done.stdout, '[Nn]ot converged', engine)
        assert any('onverged' in w for w in case.summary()['warnings']), case.summary()['warnings']
        bound = case.summary()['engine']['error_bound']
        assert bound is None or bound > 1e-6, bound


@test('--overwrite: a run is replaced only with it')
def _():
    case = Case(**small())
    case.must('solve')
    before = {n: case.file(n) for n in os.listdir(case.out)}
    done = case.run('solve', '--damping', '1')
    equal(done.returncode, 2)
    matches(done.stderr, '--overwrite')
    equal({n: case.file(n) for n in os.listdir(case.out)}, before)
    case.must('solve', '--damping', '1', '--overwrite')
    near(case.summary()['damping']['value'], 1)
    equal(case.left(), ['out'])


@test('--overwrite: files of the older run do not stay')
def _():
    case = Case()
    crosshole(case, 5, 5, 7)
    case.must('sweep', codes=(0, 1))
    case.must('solve', '--damping', '1', '--overwrite')
    equal(sorted(os.listdir(case.out)), ['parameters.csv', 'report.html', 'residuals.csv', 'summary.json'])


@test('--overwrite after a failure leaves the older run as it was')
def _():
    case = Case(**small())
    case.must('solve')
    before = {n: case.file(n) for n in os.listdir(case.out)}
    case.put('observations.csv', 'observation,value\na,x\n')
    equal(case.run('solve', '--overwrite').returncode, 3)
    equal({n: case.file(n) for n in os.listdir(case.out)}, before)
    equal(case.left(), ['out'])


@test('a folder that is no run is left alone, also with --overwrite')
def _():
    case = Case(**small())
    os.mkdir(case.out)
    with open(os.path.join(case.out, 'thesis.txt'), 'w') as file:
        file.write('mine')
    for words in ([], ['--overwrite']):
        done = case.run('solve', *words)
        equal(done.returncode, 2, words)
        matches(done.stderr, 'not a run')
    equal(os.listdir(case.out), ['thesis.txt'])
    done = case.run('solve', '--overwrite', out=case.problem)
    equal(done.returncode, 2)
    equal(sorted(os.listdir(case.problem)), ['design.csv', 'observations.csv'])
    done = case.run('solve', '--overwrite', out=case.path('design.csv'))
    equal(done.returncode, 2)
    matches(done.stderr, 'a file')


@test('a folder of a run in which something foreign lies: nothing foreign is lost')
def _():
    case = Case(**small())
    case.must('solve')
    os.mkdir(os.path.join(case.out, 'notes'))
    with open(os.path.join(case.out, 'notes', 'thesis.txt'), 'w') as file:
        file.write('mine')
    done = case.run('solve', '--damping', '1', '--overwrite')
    kept = [os.path.join(where, n) for where, _, names in os.walk(case.folder) for n in names if n == 'thesis.txt']
    equal(len(kept), 1, f'exit {done.returncode}; {done.stderr}')
    with open(kept[0]) as file:
        equal(file.read(), 'mine')


@test('an empty folder is taken, a symbolic link is not followed')
def _():
    case = Case(**small())
    os.mkdir(case.out)
    case.must('solve')
    target = scratch()
    link = os.path.join(case.folder, 'link')
    os.symlink(target, link)
    case.run('solve', out=link)
    equal(os.listdir(target), [])


@test('the default run folder is PROBLEM-COMMAND')
def _():
    case = Case()
    crosshole(case, 4, 4, 6)
    for command, words in (('solve', ['--damping', '1']), ('sweep', []), ('probe', ['--damping', '1']), ('pack', [])):
        done = leastwise(command, case.problem, *words)
        assert done.returncode in (0, 1), f'{command}: {done.stderr}'
        assert os.path.isdir(f'{case.problem}-{command}'), command


@test('numbers read back to the same double and have no more digits than that needs')
def _():
    case = Case()
    levelling(case, 5, 5)
    case.must('solve')
    seen = 0
    for name in ('parameters.csv', 'residuals.csv'):
        for row in case.rows(name):
            for column, text in row.items():
                if re.fullmatch(r'-?\d+(\.\d+)?(e[-+]?\d+)?', text):
                    number = float(text)
                    digits = len(text.split('e')[0].replace('.', '').lstrip('-').strip('0')) or 1
                    least = len(repr(number).split('e')[0].replace('.', '').lstrip('-').strip('0')) or 1
                    assert digits <= least, f'{name} {column}: {text} where {number!r} says the same'
                    seen += 1
    assert seen > 500, seen


@test('residual = predicted - observed, and the columns agree with each other')
def _():
    case = Case()
    levelling(case, 5, 5)
    case.must('solve')
    P, R = case.parameters(), case.rows('residuals.csv')
    design = {}
    for row in case_rows(case.path('design.csv')):
        design.setdefault(row['observation'], []).append((row['parameter'], float(row['coefficient'])))
    chi, redundancy = 0.0, 0.0
    for r in R:
        predicted = sum(c * float(P[p]['estimate']) for p, c in design[r['observation']])
        near(r['predicted'], predicted, 1e-12, 1e-12)
        near(r['residual'], predicted - float(r['value']), 0, 1e-12)
        ri, sigma = float(r['redundancy']), float(r['sigma'])
        near(r['standardized'], float(r['residual']) / (sigma * math.sqrt(ri)), 1e-8, 1e-9)
        near(r['detectable'], 4.13214796506 * sigma / math.sqrt(ri), 1e-9)
        near(r['bias_ratio'], 4.13214796506 * math.sqrt((1 - ri) / ri), 1e-9)
        near(r['predicted_sigma'], sigma * math.sqrt(1 - ri), 1e-9)
        near(abs(float(r['error_estimate'])), abs(float(r['residual'])) / ri, 1e-8, 1e-12)
        chi += (float(r['residual']) / sigma) ** 2
        redundancy += ri
    summary = case.summary()
    near(summary['fit']['chi_square'], chi, 1e-9)
    near(summary['sizes']['degrees_of_freedom'], redundancy, 1e-10)
    near(summary['fit']['variance_factor'], chi / redundancy, 1e-9)
    for p in P.values():
        if p['sigma_kind'] == 'fixed':
            equal((p['sigma'], p['interval_low'], p['interval_high']), ('', '', ''))
            continue
        equal((p['sigma_kind'], p['resolution'], p['at_bound']), ('exact', '1', ''))
        near(p['interval_high'], float(p['estimate']) + 1.95996398454 * float(p['sigma']), 1e-12)


def case_rows(path):
    from case import read_csv
    return read_csv(path)


@test('test statistics are empty with damping unless --sigma posterior')
def _():
    case = Case()
    crosshole(case, 5, 5, 7)
    case.must('solve', '--damping', '1')
    for r in case.rows('residuals.csv'):
        equal([r[c] for c in ('redundancy', 'standardized', 'detectable', 'bias_ratio', 'error_estimate', 'largest_shift')], [''] * 6)
    equal((case.summary()['fit']['probability'], case.summary()['fit']['rejected']), (None, None))
    case.must('solve', '--damping', '1', '--sigma', 'posterior', '--overwrite')
    assert all(r['standardized'] and r['redundancy'] for r in case.rows('residuals.csv'))
    case.must('solve', '--damping', '1', '--sigma', 'none', '--overwrite')
    equal({(r['sigma'], r['sigma_kind']) for r in case.rows('parameters.csv')}, {('', 'none')})


@test('weighted priors stand in residuals.csv and count')
def _():
    case = Case(**small(), parameters='parameter,prior,prior_sigma\nx,1,0.05\ny,0,\n')
    case.must('solve')
    names = [r['observation'] for r in case.rows('residuals.csv')]
    equal(names[:4], list('abcd'))
    equal(len(names), 5)
    matches(names[4], 'prior.*x')
    equal(case.summary()['sizes']['degrees_of_freedom'], 3)
    r = case.rows('residuals.csv')[4]
    equal((float(r['value']), float(r['sigma'])), (1.0, 0.05))
    assert r['redundancy'] and r['standardized']


@test('covariance, ellipses, resolution rows and VTK are written when asked for')
def _():
    case = Case().copy_of(os.path.join(DEMO, 'plane'))
    case.must('solve', '--covariance-of', 'all')
    P = case.parameters()
    table = {(r['parameter_a'], r['parameter_b']): float(r['covariance']) for r in case.rows('parameter_covariance.csv')}
    for name, p in P.items():
        if p['sigma']:
            near(table[name, name], float(p['sigma']) ** 2, 1e-9, what=name)
    ellipses = case.rows('ellipses.csv')
    equal(list(ellipses[0])[:7], ['point', 'to_point', 'semi_major', 'semi_minor', 'azimuth', 'confidence', 'multiplier'])
    for e in ellipses:
        assert float(e['semi_major']) >= float(e['semi_minor']) > 0, e
        equal(float(e['multiplier']) == 1, e['confidence'] == '', 'the standard ellipse has no confidence')
        if e['confidence']:
            near(e['confidence'], 0.95)
            near(e['multiplier'], 2.44774683068, 1e-9)
    case = Case()
    crosshole(case, 5, 5, 7)
    case.must('solve', '--damping', '1', '--resolution-of', 'c12,c3', '--vtk')
    rows = case.rows('resolution.csv')
    P = case.parameters()
    text = case.file('resolution.csv').decode()
    assert 'c12' in text and 'c3' in text
    matches(case.file('model.vtk').decode(), r'^# vtk DataFile Version 3\.0\n')
    with open(os.path.join(case.folder, 'list.txt'), 'w') as file:
        file.write('# two\nc3\n\nc12\n')
    case.must('solve', '--damping', '1', '--covariance-of', os.path.join(case.folder, 'list.txt'), '--overwrite')
    pairs = {frozenset((r['parameter_a'], r['parameter_b'])) for r in case.rows('parameter_covariance.csv')}
    equal(pairs, {frozenset(('c3',)), frozenset(('c12',)), frozenset(('c3', 'c12'))})


@test('--quiet: nothing on the terminal; without it a verdict with numbers')
def _():
    for command, words in (('solve', ['--damping', '1']), ('sweep', []), ('probe', ['--damping', '1']), ('pack', [])):
        case = Case()
        crosshole(case, 5, 5, 7)
        done = case.must(command, *words, '--quiet', codes=(0, 1))
        equal((done.stdout, done.stderr), ('', ''), command)
        done = case.must(command, *words, codes=(0, 1), out=os.path.join(case.folder, 'loud'))
        assert re.search(r'\d', done.stdout) and 'loud' in done.stdout, done.stdout
        equal(done.stderr, '', command)


def long_run(case):
    """Words of a solve that goes on for minutes: a chain of differences, so ill-conditioned that an iteration without
    damping needs more steps than it is given time."""
    n = 60000
    case.table('design.csv', DESIGN, [('o0', 'p0', 1)] + [r for k in range(1, n) for r in ((f'o{k}', f'p{k - 1}', -1), (f'o{k}', f'p{k}', 1))]
               + [('end', f'p{n - 1}', 1)])
    case.table('observations.csv', ('observation', 'value', 'sigma'), [(f'o{k}', 1 + 0.1 * ((k * 7919) % 13), 1) for k in range(n)] + [('end', 5, 1)])
    return ['solve', case.problem, '--out', case.out, '--engine', 'lsqr', '--tolerance', '1e-12', '--steps', '1000000000', '--threads', '1']


def start_and_interrupt(case, words, number):
    """Runs with standard error on a terminal, waits for the progress line of the iteration, sends the signal; returns the exit
    status and what the terminal showed."""
    master, slave = pty.openpty()
    child = subprocess.Popen([PROGRAM, *words], stdout=subprocess.PIPE, stderr=slave, text=True)
    os.close(slave)
    shown, sent, end = b'', False, time.monotonic() + 120
    while time.monotonic() < end:
        if select.select([master], [], [], 0.2)[0]:
            try:
                data = os.read(master, 4096)
            except OSError:
                break
            if not data:
                break
            shown += data
        if not sent and re.search(rb'(iterat|step|solv|lsqr|bidiagonal)[^:\r]*: ?\d', shown):
            child.send_signal(number)
            sent = True
        if child.poll() is not None:
            break
    if child.poll() is None and not sent:
        child.kill()
    try:
        out = child.communicate(timeout=60)[0]
    finally:
        child.kill()
        os.close(master)
    assert sent, f'no progress line of the iteration: {shown!r}, exit {child.returncode}'
    return child.returncode, shown, out


def interrupted(number):
    case = Case()
    status, shown, out = start_and_interrupt(case, long_run(case), number)
    equal(status, 130, f'exit status; {shown[-300:]!r}')
    equal(case.left(), ['out'])
    summary = case.summary()
    equal(summary['interrupted'], True)
    assert any('nterrupted' in w for w in summary['warnings']) or 'nterrupted' in out, (summary['warnings'], out)
    check_summary(summary)
    equal(len(case.rows('parameters.csv')), 60000)
    assert b'\r' in shown and b'left' not in shown.split(b'\r')[-1], 'the progress line is wiped at the end'


add('Ctrl-C in a long iteration: what is known is written, marked as interrupted, exit 130', interrupted, signal.SIGINT)


@test('an interrupt while reading: exit 130, nothing written')
def _():
    case = Case()
    words = long_run(case)
    fifo = case.path('parameters.csv')
    os.mkfifo(fifo)
    child = subprocess.Popen([PROGRAM, *words], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    with open(fifo, 'w') as file:  # the reader is there now; give it no end
        file.write('parameter\n' + ''.join(f'p{k}\n' for k in range(50)))
        file.flush()
        child.send_signal(signal.SIGINT)
        time.sleep(0.2)
        try:
            file.write(''.join(f'p{k}\n' for k in range(50, 60000)))
        except BrokenPipeError:
            pass
    try:
        out, err = child.communicate(timeout=120)
    finally:
        child.kill()
    if child.returncode == 130 and os.path.exists(case.out):
        equal(case.summary()['interrupted'], True)
    else:
        equal((child.returncode, case.left()), (130, []), f'{out} {err}')


@test('a closed standard output is no crash')
def _():
    case = Case(**small())
    child = subprocess.Popen([PROGRAM, 'solve', case.problem, '--out', case.out], stdout=subprocess.PIPE, stderr=subprocess.PIPE)
    child.stdout.close()
    child.stderr.read()
    child.stderr.close()
    assert child.wait(60) in (0, 1, 5), child.returncode
    check_summary(case.summary())


run()
