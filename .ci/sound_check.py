"""Plays cues and outings against a private sound server and compares what its monitor hears with the written sounds."""

import array
import difflib
import fcntl
import math
import os
import pty
import re
import shutil
import signal
import statistics
import struct
import subprocess
import sys
import termios
import threading
import time
import wave

BIN, HERE, TMP = sys.argv[1:4]
RATE = 48000
SOCKET = f"{TMP}/native"
ENV = dict(os.environ, PULSE_SERVER=f"unix:{SOCKET}", HOME=TMP, XDG_RUNTIME_DIR=TMP, PULSE_RUNTIME_PATH=f"{TMP}/pulse")
ENV.pop("DISPLAY", None)
QUIET = 0.005
# Peak below which a sound is the guidance tone: -24 dBFS.
GUIDED = 0.0631
CHILDREN = []
PASSED = 0


def ok(words):
    global PASSED
    PASSED += 1
    print(f"ok: {words}", flush=True)


def check(holds, words):
    if not holds:
        sys.exit(f"FAILED: {words}")


def start_server():
    words = ["pulseaudio", "-n", "--daemonize=no", "--exit-idle-time=-1", "--use-pid-file=no"]
    words += ["-L", "module-null-sink sink_name=null rate=48000 channels=1 format=float32le"]
    words += ["-L", f"module-native-protocol-unix auth-anonymous=1 socket={SOCKET}"]
    server = subprocess.Popen(words, env=ENV, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    CHILDREN.append(server)
    for _ in range(100):
        if os.path.exists(SOCKET):
            keep_awake()
            return server
        time.sleep(0.05)
    sys.exit("FAILED: the private sound server did not start")


def keep_awake():
    """Silence without end: a null sink that sleeps wakes late and swallows the beginning of a sound, which no loudspeaker does."""
    words = ["pacat", "--raw", f"--rate={RATE}", "--channels=1", "--latency-msec=10"]
    silence = open("/dev/zero", "rb")
    CHILDREN.append(subprocess.Popen(words, env=ENV, stdin=silence, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL))


class Monitor:
    """Records the null sink; every sample has the time at which it arrived here."""

    def __init__(self):
        words = ["parec", "-d", "null.monitor", "--format=float32le", f"--rate={RATE}", "--channels=1", "--raw"]
        words += ["--latency-msec=5", "--process-time-msec=5"]
        self.process = subprocess.Popen(words, env=ENV, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, bufsize=0)
        CHILDREN.append(self.process)
        self.samples, self.chunks, self.rest = array.array("f"), [], b""
        threading.Thread(target=self.read, daemon=True).start()
        # A null sink that has slept renders two seconds ahead before it listens to anybody.
        for _ in range(100):
            time.sleep(0.1)
            if len(self.samples) > RATE:
                return
        sys.exit("FAILED: the monitor gives nothing")

    def read(self):
        while block := self.process.stdout.read(65536):
            now = time.time()
            block = self.rest + block
            whole = len(block) // 4 * 4
            self.rest = block[whole:]
            self.chunks.append((len(self.samples), now))
            self.samples.frombytes(block[:whole])

    def arrived(self, sample):
        """When the block with this sample arrived."""
        return max((start, at) for start, at in self.chunks if start <= sample)[1]

    def stop(self):
        time.sleep(0.3)
        self.process.terminate()
        self.process.wait()
        CHILDREN.remove(self.process)
        return self


def written(word):
    with wave.open(f"{TMP}/wav/{word}.wav") as file:
        check(file.getframerate() == RATE and file.getnchannels() == 1, f"{word}.wav is 48 kHz mono")
        return array.array("f", (s / 32768 for s in array.array("h", file.readframes(file.getnframes()))))


def onsets(samples, quiet_ms=20):
    """First samples of notes: sound after so much quiet."""
    found, last = [], -RATE
    for i, sample in enumerate(samples):
        if abs(sample) > QUIET:
            if i - last > RATE * quiet_ms // 1000:
                found.append(i)
            last = i
    return found


def difference(heard, at, template):
    """Largest difference from a template, wherever its beginning is best laid near `at`.

    A null sink that is rewound for a new stream may lose the first milliseconds of its monitor, in the soft rise: not compared.
    """
    points = range(RATE // 50, RATE * 3 // 50, 37)

    def apart(begin):
        return sum(abs(heard[begin + i] - template[i]) for i in points)

    begins = [b for b in range(at - RATE // 60, at + 3) if b >= 0 and b + len(template) <= len(heard)]
    if not begins:
        return math.inf
    begin = min(begins, key=apart)
    return max(abs(heard[begin + i] - template[i]) for i in range(RATE // 60, len(template), 3))


def recognised(monitor, templates):
    """Every cue in a recording: (word, its first sample, largest difference)."""
    found, after = [], 0
    for at in onsets(monitor.samples):
        if at < after:
            continue
        best = min((difference(monitor.samples, at, t), w) for w, t in templates.items())
        if best[0] < 0.02:
            found.append((best[1], at, best[0]))
            after = at + len(templates[best[1]]) - RATE // 100
        else:
            found.append(("?", at, best[0]))
    return found


def amplitude(samples, hz):
    """Goertzel with a Hann window."""
    n, turn, s1, s2 = len(samples), 2 * math.pi * hz / RATE, 0.0, 0.0
    for i, x in enumerate(samples):
        s1, s2 = x * (0.5 - 0.5 * math.cos(2 * math.pi * i / n)) + 2 * math.cos(turn) * s1 - s2, s1
    return math.sqrt(max(0.0, s1 * s1 + s2 * s2 - 2 * math.cos(turn) * s1 * s2)) * 4 / n


def pitch(samples):
    return max(range(440, 1100, 2), key=lambda hz: amplitude(samples, hz) + amplitude(samples, 2 * hz))


def every_cue(templates):
    monitor, said = Monitor(), []
    for _ in range(3):
        run = subprocess.Popen([BIN, "cues"], env=ENV, stdout=subprocess.PIPE, text=True)
        said += [(time.time(), line.split()[0]) for line in run.stdout if not line.startswith("guidance")]
        check(run.wait() == 0, "`cues` plays and exits 0")
    monitor.stop()
    guided(monitor.samples)
    heard = [h for h in recognised(monitor, templates) if h[0] != "?"]
    # A machine that is busy with other work may tear a hole into one; it must not be the same one every time.
    pairs = difflib.SequenceMatcher(None, [w for w, *_ in heard], [w for _, w in said], autojunk=False).get_matching_blocks()
    whole = [(heard[p.a + i], said[p.b + i][0]) for p in pairs for i in range(p.size)]
    check(len(whole) == len(heard) >= len(said) - 2, f"cues are heard whole and in order: {heard}")
    check({h[0] for h, _ in whole} == set(templates), f"every cue is heard: {heard}")
    latencies = [(monitor.arrived(h[1]) - when) * 1000 for h, when in whole]
    for word, at, off in {h[0]: h for h, _ in whole}.values():
        describe(word, monitor.samples[at : at + len(templates[word])], off)
    ok(f"{len(whole)} of {len(said)} cues are heard whole, all in order")
    middle, worst = statistics.median(latencies), max(latencies)
    check(middle < 40 and worst < 250, f"latency median {middle:.1f} ms, largest {worst:.1f} ms")
    ok(f"from say to the monitor: median {middle:.1f} ms, largest {worst:.1f} ms")


def describe(word, part, off):
    notes = onsets(part)
    hz = [pitch(part[n + RATE // 50 : n + RATE // 20]) for n in notes]
    level, rms = max(map(abs, part)), math.sqrt(sum(s * s for s in part) / len(part))
    check(500 <= min(hz) and max(hz) <= 1000, f"{word}: fundamentals {hz} Hz")
    check(0.3 <= level <= 0.81, f"{word}: peak {level:.2f}")
    at = [round(n * 1000 / RATE) for n in notes]
    print(f"    {word:8} notes at {at} ms, {hz} Hz, peak {level:.2f}, rms {20 * math.log10(rms):.1f} dBFS, off by {off:.5f}")


def guided(samples):
    """The guidance tone of every run: it falls, then rises, and never clicks."""
    notes = [n for n in onsets(samples, 5) if max(map(abs, samples[n : n + RATE // 10])) <= GUIDED]
    check(len(notes) >= 6, f"the guidance tone is heard: {len(notes)} glides")
    glides = []
    for n in notes:
        early, late = (pitch(samples[n + RATE * ms // 1000 : n + RATE * (ms + 60) // 1000]) for ms in (40, 400))
        glides.append(late - early)
    falls, rises = sum(g < -30 for g in glides), sum(g > 30 for g in glides)
    quiet = [samples[i] for n in notes for i in range(n, n + RATE // 2)]
    step = max(abs(b - a) for n in notes for a, b in zip(samples[n : n + RATE // 2], samples[n + 1 : n + RATE // 2]))
    peak = max(map(abs, quiet))
    check(falls >= 2 and rises >= 2, f"guidance falls and rises: {glides}")
    check(peak <= 10 ** (-24 / 20) and step < 2 * math.pi * 3000 * peak / RATE, f"guidance: peak {peak:.3f}, largest step {step:.4f}")
    ok(f"guidance: {falls} glides down, {rises} up, peak {20 * math.log10(peak):.1f} dBFS, no click")


class Outing:
    """A replayed outing on a screen of its own."""

    def __init__(self, name, words, traced=False):
        self.text, self.trace, self.session = b"", f"{TMP}/{name}.strace", f"{TMP}/{name}.session"
        command = [BIN, "drive", f"{HERE}/configs/van-outing.toml", "--session", self.session, *words]
        if traced:
            command = ["strace", "-f", "-qq", "-ttt", "-T", "-e", "trace=fdatasync", "-o", self.trace, *command]
        self.pid, self.terminal = pty.fork()
        if self.pid == 0:
            os.execvpe(command[0], command, dict(ENV, TERM="xterm-256color", COLUMNS="120", LINES="40"))
        threading.Thread(target=self.read, daemon=True).start()

    def read(self):
        try:
            while block := os.read(self.terminal, 65536):
                self.text += block
        except OSError:
            pass

    def shows(self, words, seconds):
        """Waits for words on the screen. Every change of its size draws all of it anew, but for the blanks."""
        end, words = time.time() + seconds, words.replace(" ", "").encode()
        for turn in range(1000):
            seen = len(self.text)
            fcntl.ioctl(self.terminal, termios.TIOCSWINSZ, struct.pack("HHHH", 40, 120 + turn % 2, 0, 0))
            time.sleep(0.25)
            if words in re.sub(rb"\x1b\[[0-9;?]*[a-zA-Z]| ", b"", self.text[seen:]):
                return True
            if time.time() > end:
                return False

    def rings(self, seconds):
        end = time.time() + seconds
        while b"\x07" not in self.text and time.time() < end:
            time.sleep(0.05)
        return b"\x07" in self.text

    def end(self):
        return os.waitstatus_to_exitcode(os.waitpid(self.pid, 0)[1])

    def segments(self):
        with open(self.session) as file:
            return sum('"kind":"segment"' in line for line in file)


def cut_record():
    """Two holds of the sample stream, a take in each, without the way between them."""
    with open(f"{HERE}/sample-streams/van-short.record") as file, open(f"{TMP}/cut.record", "w") as cut:
        for line in file:
            head, _, rest = line.partition(" ")
            at = float(head) if head[0].isdigit() else -1
            for first, last, shift in ((28, 56, 28), (78, 106, 50)):
                if first <= at < last:
                    cut.write(f"{at - shift:.6f} {rest}")
    return f"{TMP}/cut.record"


def kept_comes_after_the_disk(templates):
    traced = shutil.which("strace") is not None
    monitor = Monitor()
    outing = Outing("kept", ["--stream", cut_record(), "--fast", "2", "--for", "55"], traced)
    status = outing.end()
    check(status in (0, 3), f"the outing ends with {status}")
    monitor.stop()
    heard = [(w, monitor.arrived(at)) for w, at, *_ in recognised(monitor, templates)]
    kept = [at for word, at in heard if word == "kept"]
    segments = outing.segments()
    check(segments > 0 and len(kept) == segments, f"{segments} segments, heard: {heard}")
    ok(f"a replayed outing: {segments} segments kept, as many kept sounds; {' '.join(w for w, _ in heard)}")
    if not traced:
        return print("    strace is not installed: that kept comes after fdatasync is not seen here")
    pattern = re.compile(r"^\d+ +(\d+\.\d+) .*fdatasync.*= 0 <(\d+\.\d+)>")
    with open(outing.trace) as file:
        synced = [float(m[1]) + float(m[2]) for m in map(pattern.match, file) if m]
    delays = [(at - max([s for s in synced if s <= at], default=-math.inf)) * 1000 for at in kept]
    # A cue that sounds already is heard to its end first, and a silence stands between two.
    check(max(delays) < 700, f"kept sounds {delays} ms after the last fdatasync")
    ok(f"kept sounds {', '.join(f'{d:.1f}' for d in delays)} ms after the fdatasync of its line returned 0")


def trouble_repeats_until_it_is_seen(templates):
    with open(f"{HERE}/sample-streams/van-faults.record") as file, open(f"{TMP}/lost.record", "w") as cut:
        for line in file:
            head, _, rest = line.partition(" ")
            if head[0].isdigit() and 166 <= float(head) < 190:
                cut.write(f"{float(head) - 166:.6f} {rest}")
    monitor = Monitor()
    outing = Outing("faults", ["--stream", f"{TMP}/lost.record", "--fast", "1", "--for", "22"])
    time.sleep(11.5)
    os.write(outing.terminal, b"\x1b")
    check(outing.end() in (0, 3), "the outing ends well")
    monitor.stop()
    troubles = [monitor.arrived(at) for w, at, *_ in recognised(monitor, templates) if w == "trouble"]
    check(len(troubles) == 2 and abs(troubles[1] - troubles[0] - 5) < 0.5, f"trouble at {troubles}")
    ok(f"a lost port: trouble, and again after {troubles[1] - troubles[0]:.2f} s, and never after Esc")


def server_lost_and_found(server, templates):
    record = f"{HERE}/sample-streams/van-short.record"
    outing = Outing("lost", ["--stream", record, "--fast", "4", "--for", "130"])
    time.sleep(4)
    check(not outing.shows("no sound", 0) and not outing.rings(0), "all is well at first")
    server.send_signal(signal.SIGKILL)
    server.wait()
    CHILDREN.remove(server)
    os.unlink(SOCKET)
    killed = time.time()
    check(outing.shows("no sound", 4), "the loss of the server is told on the screen")
    told = time.time() - killed
    check(outing.rings(4), "the bell rings")
    start_server()
    monitor = Monitor()
    check(outing.shows("sound is back", 8), "the server is found again")
    found = time.time() - killed
    check(outing.end() in (0, 3), "the outing ends well")
    monitor.stop()
    heard = [w for w, *_ in recognised(monitor, templates)]
    check("kept" in heard and outing.segments() >= 2, f"heard afterwards: {heard}")
    ok(f"server killed: told and rung after {told:.1f} s, found again {found:.1f} s after the kill; then {' '.join(heard)}; {outing.segments()} segments kept")


def main():
    words = [name[:-4] for name in os.listdir(f"{TMP}/wav") if name != "guidance.wav"]
    templates = {word: written(word) for word in words}
    check(len(templates) == 10, "ten sounds are written")
    server = start_server()
    every_cue(templates)
    kept_comes_after_the_disk(templates)
    trouble_repeats_until_it_is_seen(templates)
    server_lost_and_found(server, templates)
    print(f"{PASSED} passed, 0 failed")


try:
    main()
finally:
    for child in CHILDREN:
        child.kill()
