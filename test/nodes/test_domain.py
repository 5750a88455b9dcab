"""A domain of one's own, and what is swept up after it."""

import fcntl
import os
import socket
import subprocess
import sys
import time

import pytest

from suspended_ctrl.nodes import domain as domain_module
from suspended_ctrl.nodes.domain import NoDomainError, own_domain, sweep

# DDSI-RTPS 2.3, 9.6.1.1: PB + DG * domain, and 10 on for the first participant's unicast port.
PORT_BASE, DOMAIN_GAIN, UNICAST_OFFSET = 7400, 250, 10


def test_two_sessions_get_two_domains():
    with own_domain() as one, own_domain() as other:
        assert one != other
        assert 1 <= one <= 101
        assert 1 <= other <= 101


def test_a_domain_is_free_again_when_its_holder_is_killed(monkeypatch):
    hold = ('import time; from suspended_ctrl.nodes.domain import own_domain\n'
            'with own_domain() as domain:\n'
            '    print(domain, flush=True)\n'
            '    time.sleep(60)\n')
    holder = subprocess.Popen([sys.executable, '-c', hold], stdout=subprocess.PIPE)
    taken = int(holder.stdout.readline())
    monkeypatch.setattr(domain_module, '_order', lambda: [taken])
    with pytest.raises(NoDomainError), own_domain():
        pass
    holder.kill()
    holder.wait()
    with own_domain() as again:
        assert again == taken


def test_a_domain_in_which_others_listen_is_left_alone(monkeypatch):
    with own_domain() as free:
        pass
    monkeypatch.setattr(domain_module, '_order', lambda: [free, free + 1 if free < 101 else 1])
    with socket.socket(socket.AF_INET, socket.SOCK_DGRAM) as other:
        other.bind(('127.0.0.1', PORT_BASE + DOMAIN_GAIN * free + UNICAST_OFFSET))
        with own_domain() as mine:
            assert mine != free


def test_sweeping_takes_what_the_dead_left_and_nothing_else(tmp_path, monkeypatch):
    monkeypatch.setattr(domain_module, '_SHARED_MEMORY', tmp_path)
    port = PORT_BASE + DOMAIN_GAIN * 7 + 11
    ours = [f'fastrtps_port{port}', f'sem.fastrtps_port{port}_mutex', f'fastrtps_port{port}_el']
    dead = ['fastrtps_00aa11bb22cc33dd', 'fastrtps_00aa11bb22cc33dd_el']
    alive = ['fastrtps_99aa11bb22cc33dd', 'fastrtps_99aa11bb22cc33dd_el']
    young = ['fastrtps_55aa11bb22cc33dd', 'fastrtps_55aa11bb22cc33dd_el']
    others = [f'fastrtps_port{port + DOMAIN_GAIN}', 'fastrtps_port7000', 'something', 'sem.else']
    for name in (*ours, *dead, *alive, *young, *others):
        (tmp_path / name).touch()
    long_ago = time.time() - 60.0
    for name in (*dead, *alive):
        os.utime(tmp_path / name, (long_ago, long_ago))
    with (tmp_path / alive[1]).open('r+') as owner:
        fcntl.flock(owner, fcntl.LOCK_EX)
        sweep(7)
    assert sorted(path.name for path in tmp_path.iterdir()) == sorted(
        [*alive, *young, *others])
