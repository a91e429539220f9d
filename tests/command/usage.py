#!/usr/bin/env python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Words of the command line: wrong usage, --help, the manual pages and the completion, and that every option does something."""
import os
import re
import subprocess
import sys

sys.dont_write_bytecode = True
sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), 'lib'))
from case import DESIGN, PROGRAM, Case, crosshole, leastwise, levelling, small
from tap import add, equal, matches, run, test

COMMANDS = ('inspect', 'solve', 'sweep', 'probe', 'pack')


def options_of(command):
    """{long option: its argument or ''} as --help says."""
    text = leastwise(command, '--help').stdout
    found = {}
    for letter, name, argument in re.findall(r'^ +(?:-(\w), +)?--([a-z0-9-]+)(?:\[?=([^\s\]]+))?', text, re.M):
        found[name] = argument
    for name in ('usage', 'version'):
        found.pop(name, None)
    return found


def wrong(words, pattern):
    case = Case(**small())
    done = leastwise(*[w.replace('PROBLEM', case.problem) for w in words])
    equal(done.returncode, 2, f'exit status ({done.stderr.strip()[:200]})')
    matches(done.stderr, pattern, 'message')
    equal(case.left(), [], 'what is left')


for name, words, pattern in (
        ('no command', [], 'Usage'),
        ('an unknown command', ['adjust', 'PROBLEM'], "found 'adjust', expected a command"),
        ('no problem', ['solve'], 'PROBLEM'),
        ('two problems', ['solve', 'PROBLEM', 'PROBLEM'], 'second operand'),
        ('an unknown option', ['solve', 'PROBLEM', '--frobnicate'], 'frobnicate'),
        ('an option of another command', ['inspect', 'PROBLEM', '--damping', '1'], 'damping'),
        ('an option without its value', ['solve', 'PROBLEM', '--damping'], 'damping'),
        ('a value for a switch', ['solve', 'PROBLEM', '--quiet=yes'], 'quiet'),
        ('an unknown manual page', ['--manual', 'adjust'], "found 'adjust'")):
    add(name, wrong, words, pattern)

WRONG = {'damping': ('-1', 'large', 'nan', '1e999', '0.3x', ''), 'dampings': ('1:2', '1:2:2', '0:1:5', '1:1:5', '1,1,2', '1,x', '-1,2,3', '1:2:3:4'),
         'criteria': ('corner,', 'best', ''), 'prefer': ('small', ''), 'stretch': ('2', 'w=1', 'x=0', 'x=-1', 'x=1,'), 'also-smallest': ('-1', 'x'),
         'noise-factor': ('0', '-1'), 'misfit': ('l2',), 'models': ('some',), 'engine': ('fast',), 'steps': ('0', '1.5', 'many'),
         'storage': ('half',), 'tolerance': ('0', '1', '-1e-6'), 'datum': ('loose',), 'variance': ('known',), 'confidence': ('0', '1', '95'),
         'alpha': ('0', '1', '0.6'), 'power': ('0', '1'), 'sigma': ('prior',), 'threads': ('0', '-1', '1.5', 'all', '2000'),
         'memory': ('0', '-1G', '1X', 'G', '100'), 'seed': ('-1', '1.5', 'x'), 'repeated': ('drop',), 'scale-sigma': ('2', 'a=0', 'a=-1', 'a=x'),
         'sizes': ('0', '-1', '2,x', ''), 'size-unit': ('metres',), 'amplitude': ('0', '-1', 'x'), 'trials': ('0', '1', '2.5')}
for name, values in WRONG.items():
    command = next((c for c in ('solve', 'sweep', 'probe') if name in options_of(c)), 'solve')
    for value in values:
        add(f'--{name} {value or "(nothing)"}', wrong, [command, 'PROBLEM', f'--{name}={value}'], re.escape(f'--{name}: ') + '.*expected|--' + name)


@test('--help of the program lists every command and every exit status')
def _():
    for word in ('--help', '-h'):
        done = leastwise(word)
        equal((done.returncode, done.stderr), (0, ''))
        equal(re.findall(r'^  leastwise (\w+) +PROBLEM', done.stdout, re.M), list(COMMANDS))
        for status in ('0 done', '1 done with a warning', '2 wrong usage', '3 faulty input', '4 cannot', '5 the system', '130 interrupted'):
            assert status in done.stdout, status


@test('--version')
def _():
    done = leastwise('--version')
    equal(done.returncode, 0)
    matches(done.stdout, r'^leastwise \d+\.\d+\.\d+\n$')


@test('--help of every command: exit 0, the operand, options with words')
def _():
    for command in COMMANDS:
        done = leastwise(command, '--help')
        equal((done.returncode, done.stderr), (0, ''), command)
        matches(done.stdout, f'Usage: leastwise {command} .*PROBLEM', command)
        assert len(options_of(command)) > 10, options_of(command)


@test('manual pages have the options of --help, and troff finds no fault in them')
def _():
    for command in COMMANDS:
        page = leastwise('--manual', command)
        equal(page.returncode, 0, command)
        listed = {name.replace('\\-', '-') for name in re.findall(r'\\fB\\-\\-(.*?)\\fR', page.stdout)}
        equal(listed, set(options_of(command)) - {'help'}, command)
        matches(page.stdout, r'\.TH LEASTWISE\\-' + command.upper())
        for line in page.stdout.splitlines():
            assert not line.startswith("'") and (not line.startswith('.') or re.match(r'\.(TH|SH|TP|PP|B|I)\b', line)), line
    top = leastwise('--manual').stdout
    equal(re.findall(r'^\.TP\n\\fB(\w+)\\fR', top, re.M), list(COMMANDS))
    matches(top, 'do not replace local regulations')


@test('the completion offers the commands and the options of --help')
def _():
    done = leastwise('--completion')
    equal(done.returncode, 0)
    for command in COMMANDS:
        script = done.stdout + f'\nCOMP_WORDS=(leastwise {command} --)\nCOMP_CWORD=2\n_leastwise\nprintf "%s\\n" "${{COMPREPLY[@]}}"\n'
        offered = subprocess.run(['bash', '-c', script], capture_output=True, text=True)
        words = {w[2:] for w in offered.stdout.split() if w.startswith('--')}
        equal(words, set(options_of(command)) | {'help'}, command)
    script = done.stdout + '\nCOMP_WORDS=(leastwise "")\nCOMP_CWORD=1\n_leastwise\nprintf "%s\\n" "${COMPREPLY[@]}"\n'
    offered = subprocess.run(['bash', '-c', script], capture_output=True, text=True)
    equal(set(offered.stdout.split()) - {'--help', '--version'}, set(COMMANDS))


# Every option, given on a problem where it must matter: (command, words before, words with the option, the problem); something that
# the run wrote (or, for inspect, said) must differ from the run without it. Where the words say "same", the bytes must stand.
def net(case):
    levelling(case, 4, 4)
    case.put('observations.csv', case_text(case, 'observations.csv').replace('sigma\n', 'sigma,group\n', 1))
    lines = case_text(case, 'observations.csv').splitlines()
    case.put('observations.csv', '\n'.join([lines[0]] + [f'{line},{"odd" if k % 2 else "even"}' for k, line in enumerate(lines[1:])]) + '\n')


def blundered(case):
    net(case)
    lines = case_text(case, 'observations.csv').splitlines()
    fields = lines[8].split(',')
    fields[1] = repr(float(fields[1]) + 0.02)
    lines[8] = ','.join(fields)
    case.put('observations.csv', '\n'.join(lines) + '\n')


def case_text(case, name):
    with open(case.path(name)) as file:
        return file.read()


def rays(case):
    crosshole(case, 5, 6, 8)
    case.put('penalty.csv', 'row,parameter,coefficient\n' + ''.join(f'{j},c{j},{1 + j % 3}\n' for j in range(30)))


def rays_unordered(case):
    crosshole(case, 5, 6, 8)
    name = case.path('parameters.csv')
    lines = case_text(case, 'parameters.csv').splitlines()
    with open(name, 'w') as file:
        file.write('\n'.join([lines[0] + ',damp_weight'] + [f'{line},{1 + k % 2}' for k, line in enumerate(lines[1:])]) + '\n')


def free_net(case):
    net(case)
    case.put('parameters.csv', re.sub(r'^(p0,[^,]*),.*$', r'\1,', case_text(case, 'parameters.csv'), flags=re.M))


def altered(case):
    """Files with other numbers beside the problem, for the options that name files."""
    for name in ('design', 'observations', 'parameters', 'covariance', 'penalty', 'conditions'):
        target = os.path.join(case.folder, 'other-' + name)
        if name == 'design':
            text = case_text(case, 'design.csv').replace('o3,p3,-1', 'o3,p3,-1.001')
        elif name == 'observations':
            lines = case_text(case, 'observations.csv').splitlines()
            lines[3] = re.sub(r'^(\w+),[^,]*', r'\1,1.25', lines[3])
            text = '\n'.join(lines) + '\n'
        elif name == 'parameters':
            text = re.sub(r'^p0,([^,]*),.*$', r'p0,\1,100', case_text(case, 'parameters.csv'), flags=re.M)
        elif name == 'covariance':
            text = 'observation_a,observation_b,covariance\no1,o2,3e-7\n'
        elif name == 'penalty':
            text = 'row,parameter,coefficient\n' + ''.join(f'r{j},p{j},{j}\n' for j in range(1, 16))
        else:
            text = 'condition,parameter,coefficient,value\nc,p1,1,2\nc,p2,-1,\n'
        with open(target, 'w') as file:
            file.write(text)


def outputs(case, command, words, out):
    words = [w.replace('FOLDER', case.folder) for w in words]
    if command == 'inspect':
        return case.run(command, *words).stdout
    done = case.must(command, *words, codes=(0, 1), out=os.path.join(case.folder, out))
    files = {}
    for name in sorted(os.listdir(os.path.join(case.folder, out))):
        data = case.file(name, os.path.join(case.folder, out))
        if name == 'summary.json':
            data = re.sub(rb'"(command|seconds)": (".*"|\{[^}]*\})', b'', data)
        if name != 'report.html':
            files[name] = data
    return done.stdout.replace(out, 'OUT'), files


def matters(make, command, before, words, same=False):
    case = Case()
    make(case)
    if any('FOLDER' in w for w in words):
        altered(case)
    plain, given = outputs(case, command, before, 'plain'), outputs(case, command, [*before, *words], 'given')
    if same:
        equal(given[1], plain[1], 'files')
    else:
        assert plain != given, 'nothing changed'


DAMPED = ['--damping', '0.5', '--engine', 'dense']
ITERATIVE = ['--damping', '0.5', '--engine', 'lsqr']
MATTERS = [
    ('design', net, 'solve', [], ['--design', 'FOLDER/other-design']),
    ('observations', net, 'solve', [], ['--observations', 'FOLDER/other-observations']),
    ('parameters', net, 'solve', [], ['--parameters', 'FOLDER/other-parameters']),
    ('covariance', net, 'solve', [], ['--covariance', 'FOLDER/other-covariance']),
    ('penalty', net, 'solve', ['--penalty', 'PROBLEM-none', '--prefer', 'own', *DAMPED], ['--penalty', 'FOLDER/other-penalty']),
    ('conditions', net, 'solve', [], ['--conditions', 'FOLDER/other-conditions']),
    ('value-unit', net, 'solve', [], ['--value-unit', 'm']),
    ('parameter-unit', net, 'solve', [], ['--parameter-unit', 'mm']),
    ('scale-sigma', net, 'solve', [], ['--scale-sigma', 'odd=2']),
    ('seed', net, 'solve', [], ['--seed', '7']),
    ('quiet', net, 'solve', [], ['--quiet']),
    ('damping', rays, 'solve', [*DAMPED], ['--damping', '2']),
    ('dampings', rays, 'sweep', [], ['--dampings', '0.1:10:7']),
    ('criteria', rays, 'sweep', [], ['--criteria', 'gcv']),
    ('prefer', rays, 'solve', DAMPED, ['--prefer', 'flattest']),
    ('stretch', rays, 'solve', [*DAMPED, '--prefer', 'flattest'], ['--stretch', 'x=3']),
    ('also-smallest', rays, 'solve', [*DAMPED, '--prefer', 'flattest'], ['--also-smallest', '0.3']),
    ('noise-factor', rays, 'solve', ['--damping', 'discrepancy'], ['--noise-factor', '1.2']),
    ('misfit', blundered, 'solve', [], ['--misfit', 'huber']),
    ('models', rays, 'sweep', [], ['--models', 'none']),
    ('vtk', rays, 'solve', DAMPED, ['--vtk']),
    ('engine', rays, 'solve', ['--damping', '0.5'], ['--engine', 'cgls']),
    ('steps', rays, 'solve', ITERATIVE, ['--steps', '3']),
    ('storage', rays, 'solve', ITERATIVE, ['--storage', 'single']),
    ('tolerance', rays, 'solve', ITERATIVE, ['--tolerance', '0.1']),
    ('variance', net, 'solve', [], ['--variance', 'estimated']),
    ('confidence', net, 'solve', [], ['--confidence', '0.99']),
    ('alpha', net, 'solve', [], ['--alpha', '0.01']),
    ('power', net, 'solve', [], ['--power', '0.9']),
    ('sigma', rays, 'solve', DAMPED, ['--sigma', 'posterior']),
    ('covariance-of', net, 'solve', [], ['--covariance-of', 'all']),
    ('resolution-of', rays, 'solve', DAMPED, ['--resolution-of', 'c3,c7']),
    ('search-outliers', blundered, 'solve', [], ['--search-outliers']),
    ('variance-components', net, 'solve', [], ['--variance-components']),
    ('pattern', rays, 'probe', DAMPED, ['--pattern', 'spikes']),
    ('sizes', rays, 'probe', DAMPED, ['--sizes', '3']),
    ('size-unit', rays, 'probe', [*DAMPED, '--sizes', '1.5'], ['--size-unit', 'length']),
    ('amplitude', rays, 'probe', DAMPED, ['--amplitude', '0.2']),
    ('trials', rays, 'probe', DAMPED, ['--trials', '5']),
    ('bootstrap', rays, 'probe', [*DAMPED, '--trials', '5'], ['--bootstrap']),
]
OWN = {'repeated': 'legal.py', 'fail-on-reject': 'here', 'datum': 'here', 'out': 'everywhere', 'overwrite': 'folders.py', 'threads': 'same.py',
       'memory': 'here', 'help': 'here'}
for name, make, command, before, words in MATTERS:
    if name == 'penalty':
        before = ['--prefer', 'smallest', *DAMPED]
        words = ['--prefer', 'own', *words]
    add(f'--{name} matters to {command}', matters, make, command, before, words)
add('--threads does not matter', matters, rays, 'solve', DAMPED, ['--threads', '3'], True)


@test('every option of every command is tried by one of these tests')
def _():
    known = {name for name, *_ in MATTERS} | set(OWN)
    for command in COMMANDS:
        equal(set(options_of(command)) - known, set(), command)


@test('every option of every command is accepted by it')
def _():
    good = {'damping': '0.5', 'dampings': '0.1:10:5', 'criteria': 'gcv', 'prefer': 'flattest', 'stretch': 'x=2', 'also-smallest': '0.1',
            'noise-factor': '1.1', 'misfit': 'squares', 'models': 'none', 'engine': 'dense', 'steps': '1000', 'storage': 'double',
            'tolerance': '1e-8', 'datum': 'fixed', 'variance': 'stated', 'confidence': '0.9', 'alpha': '0.01', 'power': '0.9', 'sigma': 'posterior',
            'covariance-of': 'all', 'resolution-of': 'c1', 'threads': '2', 'memory': '1G', 'seed': '5', 'value-unit': 's', 'parameter-unit': 's/m',
            'scale-sigma': '=2', 'repeated': 'add', 'pattern': 'checker', 'sizes': '2', 'size-unit': 'cells', 'amplitude': '0.1', 'trials': '3'}
    case = Case()
    rays(case)
    for command in COMMANDS:
        for name, argument in options_of(command).items():
            if name in ('help', 'out', 'search-outliers', 'variance-components'):
                continue
            words = ['--overwrite'] if command != 'inspect' and name != 'overwrite' else []
            if command in ('solve', 'probe') and name != 'damping':
                words += ['--damping', '0.5']
            if name == 'bootstrap':
                words += ['--trials', '3']
            value = case.path(name + '.csv') if argument == 'FILE' and name not in good else good.get(name)
            if name in ('covariance', 'conditions'):
                continue  # these files are not in this problem; legal.py names them
            words.append(f'--{name}={value}' if argument else f'--{name}')
            done = case.run(command, *words)
            assert done.returncode in (0, 1), f'{command} {words}: exit {done.returncode}: {done.stderr[:300]}'


@test('--fail-on-reject exits 1 when the global test rejects, and the run is written')
def _():
    case = Case()
    blundered(case)
    case.must('solve', codes=(0,))
    equal(case.summary()['fit']['rejected'], True)
    case.must('solve', '--fail-on-reject', '--overwrite', codes=(1,))
    equal(case.summary()['fit']['rejected'], True)
    case = Case()
    net(case)
    case.must('solve', '--fail-on-reject', '--scale-sigma', '=1.2', codes=(0, 1))
    equal(case.summary()['fit']['rejected'], case.run('solve', '--fail-on-reject', '--overwrite', '--scale-sigma', '=1.2').returncode == 1)


@test('--datum free solves what --datum fixed refuses with the names of the parameters')
def _():
    case = Case()
    free_net(case)
    done = case.run('solve')
    equal(done.returncode, 4, done.stderr)
    matches(done.stderr, r'\bp\d+')
    equal(case.left(), [])
    case.must('solve', '--datum', 'free')
    summary = case.summary()
    equal(summary['sizes']['rank'], summary['sizes']['parameters'] - 1)


@test('--memory too small for the work: exit 5 before it starts, with advice')
def _():
    case = Case()
    crosshole(case, 30, 30, 25)
    done = case.run('solve', '--engine', 'dense', '--damping', '1', '--memory', '2M')
    equal(done.returncode, 5, done.stderr)
    matches(done.stderr, r'--memory')
    equal(case.left(), [])


@test('options that do not go together')
def _():
    case = Case(**small(), parameters='parameter,lower\nx,0\ny,\n')
    for words in (['--misfit', 'huber'], ['--misfit', 'l1']):
        done = case.run('solve', *words)
        equal(done.returncode, 2, words)
        matches(done.stderr, 'bounds')
    case = Case(**small())
    for words, pattern in ((['--search-outliers', '--damping', '1'], 'posterior|prior_sigma'), (['--prefer', 'flattest', '--damping', '1'], 'coordinates|x, y'),
                           (['--prefer', 'own', '--damping', '1'], 'penalty'), (['--resolution-of', 'nobody'], 'nobody'),
                           (['--covariance-of', 'nowhere.txt'], 'nowhere'), (['--scale-sigma', 'nobody=2'], 'nobody'), (['--vtk'], 'coordinates|x, y')):
        done = case.run('solve', *words)
        assert done.returncode in (2, 3), f'{words}: exit {done.returncode}: {done.stderr}'
        matches(done.stderr, pattern, words)
        equal(case.left(), [], words)


run()
