#!/usr/bin/python3
"""Measures Linewright beside the reference Python kernel: one client, one run, interleaved, medians.

    go build -o /tmp/linewright linewright/kernel/linewright
    kernel/session/testdata/beside.py /tmp/linewright [--quick]

Needs python3-jupyter-client and python3-ipykernel of Debian. Prints a table of figures, targets and whether each target is
reached, and exits with 1 if one is not. The machine should have nothing else to do; a run takes three minutes.
"""
import argparse
import json
import os
import socket
import statistics
import subprocess
import sys
import tempfile
import time
import uuid

import zmq
from jupyter_client.session import Session

PATIENCE = 120  # seconds for one answer

LINEWRIGHT = {
    "add": "1+1",
    "lines": "for i := 0; i < 20000; i++ {\n\tfmt.Println(i)\n}",
    "text": 'import "strings"\nfor i := 0; i < 10240; i++ {\n\tfmt.Println(strings.Repeat("x", 1023))\n}',
    "display": 'import "strings"\npage.Show(strings.Repeat("A", 10<<20))',
    "burn": 'import "time"\nfor i := 0; i < %d; i++ {\n\tgo func() {\n\t\tfor e := time.Now().Add(%d * time.Second); time.Now().Before(e); {\n\t\t}\n\t}()\n}\n'
    "for e := time.Now().Add(%d * time.Second); time.Now().Before(e); {\n}",
    "numbered": "n%d := %d\nn%d * 2",
}
PYTHON = {
    "add": "1+1",
    "lines": "for i in range(20000):\n    print(i)",
    "text": "for i in range(10240):\n    print('x' * 1023)",
    "display": "from IPython.display import display\ndisplay({'text/plain': 'A' * (10 << 20)}, raw=True)",
    # Processes: two threads of Python share one core.
    "burn": "import subprocess, sys, time\nfor i in range(%d):\n    subprocess.Popen([sys.executable, '-c', 'import time\\ne = time.time() + %d\\nwhile time.time() < e: pass'])\n"
    "e = time.time() + %d\nwhile time.time() < e: pass",
    "numbered": "n%d = %d\nn%d * 2",
}


class Client:
    """One front end with sockets of its own."""

    def __init__(self, connection):
        self.context = zmq.Context()
        self.session = Session(key=connection["key"].encode(), username="beside")
        self.sockets = {}
        for channel, kind in (("iopub", zmq.SUB), ("shell", zmq.DEALER), ("control", zmq.DEALER), ("hb", zmq.REQ)):
            s = self.context.socket(kind)
            s.linger = 0
            s.rcvhwm = s.sndhwm = 0
            s.reconnect_ivl = 1  # ms: a start is to be measured, not the pause between two attempts to connect
            if kind == zmq.SUB:
                s.subscribe(b"")
            elif kind == zmq.DEALER:
                s.identity = self.session.bsession
            s.connect("tcp://127.0.0.1:%d" % connection[channel + "_port"])
            self.sockets[channel] = s

    def close(self):
        for s in self.sockets.values():
            s.close()
        self.context.term()

    def send(self, channel, kind, content):
        return self.session.send(self.sockets[channel], kind, content)["header"]["msg_id"]

    def receive(self, channel, parent, timeout=PATIENCE):
        """The next message that belongs to a request, or None."""
        end = time.perf_counter() + timeout
        while self.sockets[channel].poll(max(0, (end - time.perf_counter()) * 1000)):
            _, frames = self.session.feed_identities(self.sockets[channel].recv_multipart())
            m = self.session.deserialize(frames)
            if m["parent_header"].get("msg_id") == parent:
                return m
        return None

    def until_idle(self, parent, timeout=PATIENCE):
        """The broadcasts of a request up to idle, or None if idle does not come."""
        messages = []
        while True:
            m = self.receive("iopub", parent, timeout)
            if m is None:
                return None
            messages.append(m)
            if m["msg_type"] == "status" and m["content"]["execution_state"] == "idle":
                return messages

    def execute(self, code):
        """Runs a cell; returns seconds to its reply, seconds to idle, and what it broadcast."""
        start = time.perf_counter()
        parent = self.send("shell", "execute_request", {"code": code, "silent": False, "store_history": True,
                                                        "user_expressions": {}, "allow_stdin": False, "stop_on_error": True})
        reply = self.receive("shell", parent)
        replied = time.perf_counter() - start
        if reply is None or reply["content"]["status"] != "ok":
            sys.exit("beside: the cell %r failed: %s" % (code, reply and reply["content"]))
        messages = self.until_idle(parent)
        return replied, time.perf_counter() - start, messages


class Kernel:
    """A kernel in a process of its own, and a client of it."""

    def __init__(self, argv, cells, folder):
        self.cells = cells
        ports = []
        held = [socket.create_server(("127.0.0.1", 0)) for _ in range(5)]
        for s in held:
            ports.append(s.getsockname()[1])
            s.close()
        self.connection = dict(zip(("shell_port", "iopub_port", "stdin_port", "control_port", "hb_port"), ports),
                               ip="127.0.0.1", transport="tcp", key=uuid.uuid4().hex, signature_scheme="hmac-sha256")
        path = os.path.join(folder, uuid.uuid4().hex + ".json")
        with open(path, "w") as f:
            json.dump(self.connection, f)
        start = time.perf_counter()
        self.process = subprocess.Popen(argv + [path], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        self.client = Client(self.connection)
        parent = self.client.send("shell", "kernel_info_request", {})
        if self.client.receive("shell", parent) is None:
            sys.exit("beside: %s does not start" % argv[0])
        self.start = time.perf_counter() - start

    def memory(self):
        """Resident memory in MB."""
        with open("/proc/%d/status" % self.process.pid) as f:
            return next(int(line.split()[1]) for line in f if line.startswith("VmRSS")) / 1024

    def close(self):
        self.client.send("control", "shutdown_request", {"restart": False})
        try:
            self.process.wait(20)
        except subprocess.TimeoutExpired:
            self.process.kill()
        self.client.close()


def percentile(values, p):
    return sorted(values)[min(len(values) - 1, int(len(values) * p / 100))]


def starts(new, rounds):
    """Seconds from the start of the process to the first kernel_info_reply."""
    times = {name: [] for name in new}
    for _ in range(rounds):
        for name in new:
            k = new[name]()
            times[name].append(k.start)
            k.close()
    return {name: statistics.median(v) for name, v in times.items()}


def round_trips(kernels, rounds):
    """Seconds from the request of 1+1 to its reply, in blocks of 50 by turns."""
    times = {name: [] for name in kernels}
    for _ in range(rounds):
        for name, k in kernels.items():
            times[name] += [k.client.execute(k.cells["add"])[0] for _ in range(50)]
    return times


def outputs(kernels, cell, size, rounds):
    """Seconds from the request of a cell that puts out much to idle."""
    times = {name: [] for name in kernels}
    for _ in range(rounds):
        for name, k in kernels.items():
            _, idle, messages = k.client.execute(k.cells[cell])
            got = sum(len(m["content"]["text"]) for m in messages if m["msg_type"] == "stream")
            got += sum(len(m["content"]["data"]["text/plain"]) for m in messages if m["msg_type"] == "display_data")
            if got != size:
                sys.exit("beside: %s of %s gave %d characters, not %d" % (cell, name, got, size))
            times[name].append(idle)
    return {name: statistics.median(v) for name, v in times.items()}


def heartbeats(k, seconds):
    """Seconds from beat to echo while a cell keeps every core busy."""
    cores = os.cpu_count()
    parent = k.client.send("shell", "execute_request", {"code": k.cells["burn"] % (cores - 1, seconds, seconds), "silent": False,
                                                        "store_history": False, "user_expressions": {}, "allow_stdin": False})
    time.sleep(0.5)
    times, end, hb = [], time.perf_counter() + seconds - 1, k.client.sockets["hb"]
    while time.perf_counter() < end:
        start = time.perf_counter()
        hb.send(b"beat")
        hb.recv()
        times.append(time.perf_counter() - start)
        time.sleep(0.01)
    k.client.until_idle(parent)
    return times


def losses(k, clients):
    """Of so many new clients that ask at once, how many do not hear both status messages."""
    lost = 0
    for _ in range(clients):
        c = Client(k.connection)
        parent = c.send("shell", "kernel_info_request", {})
        if c.receive("shell", parent) is None:
            sys.exit("beside: a new client is not answered")
        m = c.receive("iopub", parent, 0.5)
        lost += m is None or m["content"].get("execution_state") != "busy" or c.until_idle(parent, 0.5) is None
        c.close()
    return lost


def many_cells(k, cells):
    """Memory in MB after a fifth of the cells and after all, and seconds a cell in the second tenth and in the last."""
    tenth, times, memory = cells // 10, [], []
    for i in range(cells):
        times.append(k.client.execute(k.cells["numbered"] % (i % 100, i, i % 100))[0])
        if i + 1 in (2 * tenth, cells):
            time.sleep(0.2)
            memory.append(k.memory())
    return memory, statistics.median(times[tenth:2 * tenth]), statistics.median(times[-tenth:])


def main():
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("linewright", help="the command to measure")
    parser.add_argument("--quick", action="store_true", help="a tenth of the repetitions")
    parser.add_argument("--cells", type=int, default=10000, help="cells of the last measurement (default %(default)s)")
    arguments = parser.parse_args()
    few = 10 if arguments.quick else 1
    rows = []

    def row(what, ours, theirs, target, reached):
        rows.append((what, ours, theirs, target, "yes" if reached else "NO"))
        print("  ".join(str(x) for x in rows[-1]), file=sys.stderr, flush=True)

    with tempfile.TemporaryDirectory() as folder:
        new = {
            "linewright": lambda: Kernel([arguments.linewright, "serve"], LINEWRIGHT, folder),
            "python": lambda: Kernel(["/usr/bin/python3", "-m", "ipykernel_launcher", "-f"], PYTHON, folder),
        }

        def times(what, ours, theirs, target):
            row(what, "%.2f ms" % (ours * 1e3), "%.2f ms" % (theirs * 1e3), "1/%g (now 1/%.1f)" % (target, theirs / ours), ours * target <= theirs)

        t = starts(new, max(3, 20 // few))
        times("start to kernel_info_reply", t["linewright"], t["python"], 12)

        kernels = {name: make() for name, make in new.items()}
        round_trips(kernels, 1)
        t = round_trips(kernels, max(2, 20 // few))
        times("1+1 reply, p50", *(percentile(t[n], 50) for n in new), 6)
        times("1+1 reply, p99", *(percentile(t[n], 99) for n in new), 5)
        for k in kernels.values():
            k.close()

        kernels = {name: make() for name, make in new.items()}
        rounds = max(3, 9 // few)
        numbers = sum(len(str(i)) + 1 for i in range(20000))
        t = outputs(kernels, "lines", numbers, rounds)
        times("20,000 printed lines to idle", t["linewright"], t["python"], 1)
        t = outputs(kernels, "text", 10 << 20, rounds)
        times("10 MB printed to idle", t["linewright"], t["python"], 1)
        t = outputs(kernels, "display", 10 << 20, rounds)
        times("10 MB displayed to idle", t["linewright"], t["python"], 1)
        many = {name: k.memory() for name, k in kernels.items()}
        for k in kernels.values():
            k.close()

        memory = {name: [] for name in new}
        for _ in range(max(1, 5 // few)):
            for name in new:
                k = new[name]()
                k.client.execute(k.cells["lines"])
                k.client.execute(k.cells["text"])
                memory[name].append(k.memory())
                k.close()
        once = {name: statistics.median(v) for name, v in memory.items()}
        row("resident after 20,000 lines and 10 MB", "%.0f MB" % once["linewright"], "%.0f MB" % once["python"], "no larger", once["linewright"] <= once["python"])
        row("resident after %d times 20,000 lines and 20 MB" % rounds, "%.0f MB" % many["linewright"], "%.0f MB" % many["python"], "no larger", many["linewright"] <= many["python"])

        kernels = {name: make() for name, make in new.items()}
        beats = {name: percentile(heartbeats(k, 10 if few == 1 else 3), 99) for name, k in kernels.items()}
        row("heartbeat while all cores burn, p99", "%.2f ms" % (beats["linewright"] * 1e3), "%.2f ms" % (beats["python"] * 1e3), "5 ms", beats["linewright"] <= 5e-3)
        n = 200 // few
        lost = {name: losses(k, n) for name, k in kernels.items()}
        row("new clients that lose status messages", "%d of %d" % (lost["linewright"], n), "%d of %d" % (lost["python"], n), "none", lost["linewright"] == 0)
        for k in kernels.values():
            k.close()

        k = new["linewright"]()
        (early, late), first, last = many_cells(k, arguments.cells // few)
        k.close()
        row("%d cells: resident after a fifth and all" % (arguments.cells // few), "%.0f, %.0f MB" % (early, late), "-", "+5 % at most", late <= early * 1.05)
        row("%d cells: second and last tenth, a cell" % (arguments.cells // few), "%.2f, %.2f ms" % (first * 1e3, last * 1e3), "-", "+10 % at most", last <= first * 1.1)

    rows.insert(0, ("", "Linewright", "reference", "target", "reached"))
    widths = [max(len(r[i]) for r in rows) for i in range(5)]
    print()
    for r in rows:
        print("  ".join(x.ljust(w) for x, w in zip(r, widths)).rstrip())
    sys.exit(any(r[4] == "NO" for r in rows))


if __name__ == "__main__":
    main()
