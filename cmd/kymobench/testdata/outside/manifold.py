"""A small bench outside of Kymobench: a pressure source, a fast valve, a UUT
with its channel, and a reference manometer in one of three families, each on a
serial port. It shares no code with the program or its simulated bench.

usage: manifold.py REFERENCE DIR GAIN
  REFERENCE  modbus (pymodbus), scpi or running (pyserial)
  DIR        has the ports reference, uut, source and valve
  GAIN       of the UUT; 1.0 is a good one

It prints "ready" and ends when its standard input does.
"""

import math
import random
import struct
import sys
import threading
import time

import serial

STEP = 0.001  # s
IDENTITY = "Outside,%s," + sys.argv[1] + ",1.0"


class Manifold:
    """The gas, the UUT's line and the reference's lag; pressures in mmHg."""

    def __init__(self, gain):
        self.lock = threading.Lock()
        self.gain = gain
        self.mode, self.target, self.open = "vent", 0.0, False
        self.pressure = self.line = self.speed = self.lagging = 0.0
        self.taken = -0.12  # the reference shows 0.12 until it is zeroed

    def step(self):
        if self.open:
            self.pressure *= math.exp(-STEP / 0.001)
        elif self.mode == "drive":
            rate = (self.target - self.pressure) / 0.25
            self.pressure += max(-200.0, min(200.0, rate)) * STEP
        elif self.mode == "vent":
            self.pressure *= math.exp(-STEP / 0.15)
        w, zeta, parts = 2 * math.pi * 30.0, 0.4, 8
        for _ in range(parts):  # the line, semi-implicit
            pull = w * w * (self.pressure - self.line) - 2 * zeta * w * self.speed
            self.speed += pull * STEP / parts
            self.line += self.speed * STEP / parts
        self.lagging += (self.pressure - self.lagging) * STEP / 0.1

    def reference(self):
        with self.lock:
            return self.lagging - self.taken + random.gauss(0, 0.01)

    def zero(self):
        with self.lock:
            self.taken = self.lagging

    def uut(self):
        return self.gain * self.line + 1.5 + random.gauss(0, 0.08)


def stream(manifold, port):
    """Keeps the time and sends the UUT's lines, 500 a second in bursts."""
    began, steps = time.monotonic(), 0
    while True:
        time.sleep(0.01)
        out = []
        with manifold.lock:
            while steps * STEP < time.monotonic() - began:
                manifold.step()
                steps += 1
                if steps % 2 == 0:
                    out.append("%+08.2f\r\n" % manifold.uut())
        port.write("".join(out).encode())


def talk(port, answers):
    """Answers lines; answers maps the first word to a function of the rest."""
    heard = b""
    while True:
        heard += port.read(max(1, port.in_waiting))
        *lines, heard = heard.replace(b"\r", b"\n").split(b"\n")
        for text in lines:
            word, _, rest = text.decode("ascii", "replace").partition(" ")
            if word in answers:
                said = answers[word](rest)
                if said is not None:
                    port.write((said + "\n").encode())


def common(name):
    return {"*IDN?": lambda _: IDENTITY % name, "*CLS": lambda _: None, "SYST:ERR?": lambda _: '0,"No error"', "SYST:UPT?": lambda _: "7200"}


def source(manifold):
    def drive(rest):
        with manifold.lock:
            manifold.mode, manifold.target = "drive", float(rest)

    def become(mode):
        def change(_):
            with manifold.lock:
                manifold.mode = mode
        return change

    return common("source") | {"SOUR:PRES": drive, "SOUR:HOLD": become("hold"), "SOUR:VENT": become("vent")}


def valve(manifold):
    def strike(is_open):
        def change(_):
            with manifold.lock:
                manifold.open = is_open
        return change

    return common("valve") | {"ROUT:OPEN": strike(True), "ROUT:CLOS": strike(False)}


def scpi(manifold, port):
    # The three forms of IEEE 488.2 in turn, each as precise as the last.
    forms = ["%.2f", "%.4E", "%+.3f"]

    def read(_):
        forms.append(forms.pop(0))
        return forms[0] % manifold.reference()

    talk(port, common("manometer") | {"MEAS:PRES?": read, "CAL:ZERO": lambda _: manifold.zero()})


def running(manifold, port):
    """20 lines a second by itself; a line Z zeroes it."""
    port.timeout = 0.05
    while True:
        if b"Z" in port.read(16):
            manifold.zero()
        port.write(b"%9.2f mmHg\r\n" % manifold.reference())


def modbus(manifold, name):
    """Station 5 of pymodbus: the pressure as float32 in input registers 0 and 1,
    a name in holding registers 100 to 107; 1 in holding register 16 zeroes."""
    from pymodbus.datastore import ModbusServerContext, ModbusSlaveContext, ModbusSparseDataBlock
    from pymodbus.server import StartSerialServer
    from pymodbus.transaction import ModbusRtuFramer

    text = b"OUTSIDE P-77".ljust(16, b"\0")
    words = struct.unpack(">8H", text)

    class Pressure(ModbusSparseDataBlock):
        def getValues(self, address, count=1):
            pair = struct.unpack(">2H", struct.pack(">f", manifold.reference()))
            return list(pair)[address:address + count]

    class Settings(ModbusSparseDataBlock):
        def setValues(self, address, values, use_as_default=False):
            super().setValues(address, values, use_as_default)
            if address == 16:
                manifold.zero()

    holding = {100 + i: w for i, w in enumerate(words)} | {16: 0}
    slave = ModbusSlaveContext(hr=Settings(holding), ir=Pressure({0: 0, 1: 0}), zero_mode=True)
    StartSerialServer(context=ModbusServerContext(slaves={5: slave}, single=False), framer=ModbusRtuFramer,
                      port=name, baudrate=19200, timeout=0.02, ignore_missing_slaves=True)


def main():
    kind, folder, gain = sys.argv[1], sys.argv[2], float(sys.argv[3])
    manifold = Manifold(gain)

    def opened(name):
        return serial.Serial(folder + "/" + name, 115200)

    def start(target, *args):
        threading.Thread(target=target, args=args, daemon=True).start()

    start(stream, manifold, opened("uut"))
    start(talk, opened("source"), source(manifold))
    start(talk, opened("valve"), valve(manifold))
    if kind == "modbus":
        start(modbus, manifold, folder + "/reference")
    else:
        start({"scpi": scpi, "running": running}[kind], manifold, opened("reference"))
    time.sleep(0.5)
    print("ready", flush=True)
    sys.stdin.read()


main()
