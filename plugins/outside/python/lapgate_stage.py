"""Serves a stage written in Python as a process of its own.

It needs Debian's python3-grpcio, python3-protobuf and python3-numpy. stage_pb2.py beside
it is made by `protoc --python_out=plugins/outside/python -I proto/stagepb stage.proto`.
"""

import concurrent.futures
import json
import mmap
import os
import re
import sys
import tempfile
import threading
import time
import traceback
import types

import grpc
import numpy as np

import stage_pb2 as pb

CONTRACT_VERSION = 1
_COOKIE = ("LAPGATE_STAGE", "a stage of its own")
_UNLIMITED = [("grpc.max_receive_message_length", -1), ("grpc.max_send_message_length", -1)]
_MONO8, _WORDS = 0x01080001, (0x01100003, 0x01100005, 0x01100007)
_MONO10P, _MONO12P, _MONO12PACKED = 0x010A0046, 0x010C0047, 0x010C0006


class BadInput(Exception):
    """The frame, or what else the stage was given, cannot be worked on."""


class _Memory:
    """The host's memory files, each mapped once."""

    def __init__(self):
        self._maps, self._lock = {}, threading.Lock()

    def _map(self, path, writable):
        with self._lock:
            if path not in self._maps:
                fd = os.open(path, os.O_RDWR if writable else os.O_RDONLY)
                try:
                    prot = mmap.PROT_READ | (mmap.PROT_WRITE if writable else 0)
                    self._maps[path] = mmap.mmap(fd, 0, flags=mmap.MAP_SHARED, prot=prot)
                finally:
                    os.close(fd)
            return self._maps[path]

    def fetch(self, pixels, dtype):
        """Returns pixels as a flat, read-only array without a copy."""
        if pixels.WhichOneof("where") == "shared":
            s, size = pixels.shared, np.dtype(dtype).itemsize
            return np.frombuffer(self._map(s.path, False), dtype, s.length // size, s.offset)
        return np.frombuffer(pixels.data, dtype)

    def writer(self, output):
        """Returns a function that puts an array into the slot, or into the message."""
        used = 0

        def put(array):
            nonlocal used
            data = np.ascontiguousarray(array, np.float32)
            if output is None or used + data.nbytes > output.length:
                return pb.Pixels(data=data.tobytes())
            at = output.offset + used
            np.frombuffer(self._map(output.path, True), np.float32, data.size, at)[:] = data.ravel()
            used += (data.nbytes + 63) & ~63
            return pb.Pixels(shared=pb.SharedBytes(path=output.path, offset=at, length=data.nbytes, generation=output.generation))

        return put


def _unpack(frame, flat):
    """Returns a frame's counts as an array of height × width; a copy only where packed."""
    width, height, stride = frame.width, frame.height, frame.stride
    rows = flat.reshape(height, stride)
    if frame.pixel_format == _MONO8:
        return rows[:, :width]
    if frame.pixel_format in _WORDS:
        if stride % 2:
            rows = np.ascontiguousarray(rows[:, : 2 * width])
        return rows.view("<u2")[:, :width]
    if frame.pixel_format == _MONO12PACKED:
        b = rows[:, : (width + 1) // 2 * 3].astype(np.uint16)
        first, middle, last = b[:, 0::3], b[:, 1::3], b[:, 2::3]
        pairs = np.stack([first << 4 | middle & 15, last << 4 | middle >> 4], axis=2)
        return pairs.reshape(height, -1)[:, :width]
    if frame.pixel_format in (_MONO10P, _MONO12P):
        depth = 10 if frame.pixel_format == _MONO10P else 12
        bits = np.unpackbits(rows, axis=1, bitorder="little")[:, : width * depth]
        return bits.reshape(height, width, depth) @ (1 << np.arange(depth, dtype=np.uint16))
    raise BadInput(f"pixel format 0x{frame.pixel_format:08X} is not understood")


def _mask(runs, height, width):
    """Returns runs (y, x0, x1, half open) as a picture of bool."""
    out = np.zeros((height, width), bool)
    for y, x0, x1 in np.array(runs, np.int64).reshape(-1, 3):
        out[y, x0:x1] = True
    return out


def runs_of(mask):
    """Returns a picture of bool as runs: y, x0, x1 of each, half open, in one list."""
    edges = np.diff(np.pad(mask.astype(np.int8), ((0, 0), (1, 1))), axis=1)
    y0, x0 = np.nonzero(edges == 1)
    _, x1 = np.nonzero(edges == -1)
    return np.stack([y0, x0, x1], axis=1).ravel().tolist()


class Item:
    """One view (or the unit with its views) on its way, and what the stage makes of it.

    Arrays that it gives are read only and valid until run returns.
    """

    def __init__(self, item, memory=None, output=None, calibration=None):
        self.message, self.calibration = item, calibration
        self._memory = memory or _Memory()
        self._put = self._memory.writer(output)
        self.answer = pb.RunResponse()
        self.views = [Item(v, self._memory) for v in item.views]

    @property
    def view(self):
        return self.message.view

    @property
    def frames(self):
        """Counts of each frame, height × width, uint8 or uint16; reads "raw"."""
        return [_unpack(f, self._memory.fetch(f.pixels, np.uint8)) for f in self.message.frames]

    @property
    def frame(self):
        """Counts of the first frame."""
        if not self.message.frames:
            raise BadInput("the view has no frame")
        f = self.message.frames[0]
        return _unpack(f, self._memory.fetch(f.pixels, np.uint8))

    @property
    def um_per_px(self):
        """µm that a pixel covers at the middle of the view, or of its ring; 0 = not known."""
        if not self.message.geometry.HasField("annulus"):
            return self.message.geometry.planar.um_per_px
        a = self.message.geometry.annulus  # √(along · across) of the middle, as in areas
        around = (a.inner_um + a.outer_um) / (a.inner_px + a.outer_px)
        return float(np.sqrt(around * a.slant_um / (a.outer_px - a.inner_px)))

    @property
    def region(self):
        """The pixels to be inspected, height × width of bool; reads "region". None = not known."""
        if not self.message.HasField("region"):
            return None
        r = self.message.region
        return _mask([n for z in r.zones for n in z.runs], r.height, r.width)

    @property
    def defects(self):
        """What earlier stages found, as messages; reads "defects"."""
        return self.message.defects

    def plane(self, name):
        """A plane that an earlier stage wrote, float32; reads its name."""
        for p in self.message.planes:
            if p.name == name:
                return self._memory.fetch(p.pixels, np.float32).reshape(p.height, p.stride)[:, : p.width]
        raise BadInput(f"the view has no {name} plane; put the stage that writes it earlier in the recipe")

    def measure(self, name, value, unit=""):
        """Adds a measurement."""
        self.answer.measurements.add(name=name, value=float(value), unit=unit)

    def prove(self, name, value, low, high, unit="", reason=""):
        """Adds a proof; it fails, and the unit is held, unless low <= value <= high."""
        ok = bool(low <= value <= high)
        why = "" if ok else reason or f"{name} is {value:g} {unit}, want {low:g} to {high:g}"
        self.answer.proofs.add(name=name, value=float(value), low=low, high=high, unit=unit, ok=ok, reason=why)

    def hold(self, reason):
        """Holds the unit."""
        self.answer.hold = reason

    def defect(self, kind, x_px, y_px, box=None, **measures):
        """Adds a defect; box is x0, y0, x1, y1, half open. The host adds what is in µm."""
        h, w = (self.message.frames[0].height, self.message.frames[0].width) if self.message.frames else (1 << 30, 1 << 30)
        x0, y0, x1, y1 = box or (int(x_px), int(y_px), int(x_px) + 1, int(y_px) + 1)
        self.answer.defects.add(kind=kind, x_px=float(x_px), y_px=float(y_px), x0=max(int(x0), 0), y0=max(int(y0), 0),
                                x1=min(int(x1), w), y1=min(int(y1), h), **measures)

    def write(self, name, array, unit="", step=1.0, origin=(0.0, 0.0)):
        """Writes a plane, height × width, sent as float32."""
        h, w = array.shape
        self.answer.planes.add(name=name, unit=unit, width=w, height=h, stride=w, step=step,
                               origin_x=origin[0], origin_y=origin[1], pixels=self._put(array))


def _kind(value):
    return {bool: "boolean", int: "integer", float: "number", str: "string", list: "array"}[type(value)]


def _schema(value):
    out = {"type": "object" if isinstance(value, dict) else _kind(value)}
    if isinstance(value, dict):
        out["properties"] = {k: _schema(v) for k, v in value.items()}
        out["additionalProperties"] = False
    if isinstance(value, list):
        out["items"] = _schema(value[0]) if value else {"type": "string"}
    return out


def _lay(defaults, given):
    """Lays given settings over the defaults; returns them and what is wrong, by key."""
    out, wrong = dict(defaults), {}
    for key, value in given.items():
        if key not in defaults:
            wrong[key] = f"there is no such setting, want one of {', '.join(defaults)}"
        elif type(defaults[key]) is float and type(value) is int:
            out[key] = float(value)
        elif type(value) is not type(defaults[key]):
            wrong[key] = f"got {value!r}, want a {_kind(defaults[key])}"
        else:
            out[key] = value
    return out, wrong


class _Service:
    def __init__(self, describe, defaults, check, run):
        self._describe, self._defaults, self._check, self._run = describe, defaults, check, run
        self._memory, self._open, self._lock, self._last = _Memory(), {}, threading.Lock(), 0

    def describe(self, _request, _context):
        return self._describe

    def _settings(self, text):
        settings, wrong = _lay(self._defaults, json.loads(text or "{}"))
        if not wrong and self._check:
            wrong = self._check(types.SimpleNamespace(**settings)) or {}
        return settings, wrong

    def check_settings(self, request, _context):
        settings, wrong = self._settings(request.settings_json)
        if wrong:
            return pb.CheckSettingsResponse(problems=[pb.SettingProblem(key=k, message=m) for k, m in wrong.items()])
        return pb.CheckSettingsResponse(effective_settings_json=json.dumps(settings))

    def open(self, request, context):
        settings, wrong = self._settings(request.settings_json)
        if wrong:
            context.abort(grpc.StatusCode.INVALID_ARGUMENT, "\n".join(f"{k}: {m}" for k, m in wrong.items()))
        planes = {}
        for name in ("dark", "stray", "response"):
            if request.calibration.HasField(name):
                p = getattr(request.calibration, name)
                planes[name] = self._memory.fetch(p.pixels, np.float32).reshape(p.height, p.stride)[:, : p.width].copy()
        with self._lock:
            self._last += 1
            self._open[self._last] = (types.SimpleNamespace(**settings), planes)
            return pb.OpenResponse(handle=self._last, effective_settings_json=json.dumps(settings))

    def run(self, request, context):
        settings, planes = self._open.get(request.handle, (None, None))
        if settings is None:
            context.abort(grpc.StatusCode.NOT_FOUND, f"no open stage {request.handle}")
        output = request.output if request.HasField("output") else None
        item = Item(request.item, self._memory, output, planes)
        try:
            self._run(item, settings)
        except BadInput as err:
            context.abort(grpc.StatusCode.INVALID_ARGUMENT, str(err))
        except Exception as err:  # the unit is held; the process goes on
            traceback.print_exc()
            context.abort(grpc.StatusCode.FAILED_PRECONDITION, f"{type(err).__name__}: {err}")
        return item.answer

    def close(self, request, _context):
        with self._lock:
            self._open.pop(request.handle, None)
        return pb.CloseResponse()


def serve(type, version, summary, run, reads=("raw",), writes=("measurements",), settings=None, check=None, scope="view", workers=4):
    """Makes this process a stage until its host lets go of it. It does not return.

    run(item, settings) works on one item; it is called from several threads. settings
    are the defaults, a dict of lower_snake_case keys to bool, int, float, str or lists;
    check(settings) returns what is wrong with some, as a dict of key to message.
    """
    if os.environ.get(_COOKIE[0]) != _COOKIE[1]:
        sys.exit("This program is a stage: a lapgated server starts it. Try `lapgated stages verify` with its path.")
    settings = settings or {}
    if bad := [k for k in settings if not re.fullmatch("[a-z][a-z0-9_]*", k)]:
        sys.exit(f"settings {bad}: want keys of a-z, 0-9 and _")
    described = pb.DescribeResponse(
        contract_version=CONTRACT_VERSION, type=type, version=version, summary=summary, reads=list(reads), writes=list(writes),
        scope=pb.SCOPE_UNIT if scope == "unit" else pb.SCOPE_VIEW, default_settings_json=json.dumps(settings), settings_schema_json=json.dumps(_schema(settings)))
    _listen(_Service(described, settings, check, run), workers)


def _listen(service, workers):
    done = threading.Event()
    server = grpc.server(concurrent.futures.ThreadPoolExecutor(workers + 2), options=_UNLIMITED)
    calls = {}
    for name, call, message in (("Describe", service.describe, pb.DescribeRequest), ("CheckSettings", service.check_settings, pb.CheckSettingsRequest),
                                ("Open", service.open, pb.OpenRequest), ("Run", service.run, pb.RunRequest), ("Close", service.close, pb.CloseRequest)):
        calls[name] = grpc.unary_unary_rpc_method_handler(call, message.FromString, lambda m: m.SerializeToString())
    plain = grpc.unary_unary_rpc_method_handler
    server.add_generic_rpc_handlers((
        grpc.method_handlers_generic_handler("lapgate.stage.v1.StageService", calls),
        grpc.method_handlers_generic_handler("grpc.health.v1.Health", {"Check": plain(lambda _r, _c: b"\x08\x01")}),
        grpc.method_handlers_generic_handler("plugin.GRPCController", {"Shutdown": plain(lambda _r, _c: done.set() or b"")}),
    ))
    folder = os.environ.get("PLUGIN_UNIX_SOCKET_DIR") or tempfile.mkdtemp()
    address = os.path.join(folder, "stage.sock")
    server.add_insecure_port("unix:" + address)
    server.start()
    print(f"1|{CONTRACT_VERSION}|unix|{address}|grpc", flush=True)
    os.dup2(2, 1)  # from here on, what is printed is the log
    sys.stdout = sys.stderr
    parent = os.getppid()
    while not done.wait(1) and os.getppid() == parent:
        pass
    server.stop(0.1)
    time.sleep(0.05)
    os._exit(0)
