# SPDX-License-Identifier: GPL-3.0-or-later
"""Running the contenders: each is a process of its own, all of one comparison take turns, medians of each are compared."""
import os
import statistics
import subprocess
import sys
import time


class Place:
    """Where the bench works: sources, build, data folder; quick: smaller sizes."""

    def __init__(self, source, build, quick):
        self.source, self.build, self.quick = source, build, quick
        self.data = os.path.join(build, 'bench')
        self.program = os.path.join(build, 'leastwise')
        os.makedirs(self.data, exist_ok=True)

    def tool(self, name):
        return os.path.join(self.build, 'tests', 'bench', name)

    def script(self, name):
        return os.path.join(self.source, 'tests', 'bench', name)

    def make(self, name, maker, *arguments):
        """A data file, made once."""
        path = os.path.join(self.data, name)
        if not os.path.exists(path):
            say(f'making {name}')
            maker(path, *arguments)
        return path

    def folder(self, matrix, name, order):
        """A problem folder of CSV files, made once from a matrix file."""
        path = os.path.join(self.data, name)
        if not os.path.exists(os.path.join(path, 'design.csv')):
            say(f'making {name}')
            subprocess.run([self.tool('read'), matrix, 'write', path, order], check=True)
        return path


def say(text):
    print(text, file=sys.stderr, flush=True)


def environment():
    fixed = dict(os.environ, OMP_NUM_THREADS='1', OPENBLAS_NUM_THREADS='1', LC_ALL='C')
    fixed['PYTHONDONTWRITEBYTECODE'] = '1'
    return fixed


def run(command, codes=(0,)):
    """Runs one contender: its lines "name value" and, of the whole process, wall and cpu (seconds)."""
    start = time.monotonic()
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, env=environment())
    output = process.stdout.read()
    message = process.stderr.read()
    _, status, usage = os.wait4(process.pid, 0)
    process.returncode = os.waitstatus_to_exitcode(status)
    if process.returncode not in codes:
        raise RuntimeError(f'{" ".join(map(str, command))}: exit {process.returncode}: {message.strip()[-400:]}')
    result = {'process_wall': time.monotonic() - start, 'process_cpu': usage.ru_utime + usage.ru_stime}
    for line in output.splitlines():
        word = line.split()
        if len(word) == 2:
            try:
                result[word[0]] = float(word[1])
            except ValueError:
                pass
    return result


def interleave(contenders, rounds):
    """contenders: {name: command}. In each round each runs once; a dictionary of lists of results."""
    results = {name: [] for name in contenders}
    for round_number in range(rounds):
        for name, command in contenders.items():
            say(f'  {name} ({round_number + 1}/{rounds})')
            results[name].append(run(command))
    return results


def middle(results, name):
    return statistics.median(result[name] for result in results)


def spread(results, name):
    """Largest over smallest of the rounds: how noisy the machine was."""
    values = [result[name] for result in results]
    return max(values) / min(values)
