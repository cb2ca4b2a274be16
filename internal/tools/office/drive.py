"""Drives one LibreOffice for a test.

    drive.py PROFILE LOCALE FOLDER

It starts soffice, headless, with a new profile in the directory PROFILE, the locale LOCALE and FOLDER as the one trusted
location, and prints {"ready": true}. Then every line of standard input is a request in JSON, {"do": NAME, ...}, and is answered
with one line: {"ok": RESULT} or {"error": TEXT}. It ends what it started when standard input ends, or when it is told to.

Requests:
    module  name, source             puts a Basic module into the user's library Standard
    call    name, args               calls a function or macro of that library, "Module.Name", and gives its value
    open    path, [filter, options]  opens a document in sight, as a user would, and gives the names of its sheets
    type    sheet, cell, text        types a formula, in the locale's own form
    set     sheet, cell, value, [format]   puts a number or a text into a cell
    select  sheet, range             selects cells
    again   -                        recalculates everything
    read    sheet, range             gives rows of {kind, of, text, number, error, formula}, as they are shown
    whole   sheet                    gives the same of the whole used area, fast, without errors and with numbers not as they are shown
    close   -                        closes the document
"""
import json
import os
import signal
import subprocess
import sys
import threading
import time

import uno
from com.sun.star.beans import PropertyValue
from com.sun.star.connection import NoConnectException

START_SECONDS = 90
END_SECONDS = 20
# LIFE_SECONDS ends a program that hangs; the request in work then fails.
LIFE_SECONDS = 180


def prop(name, value):
    p = PropertyValue()
    p.Name, p.Value = name, value
    return p


def url(path):
    return uno.systemPathToFileUrl(os.path.abspath(path))


class Office:
    def __init__(self, profile, locale, folder):
        self.doc = None
        os.makedirs(os.path.join(profile, "user"), exist_ok=True)
        with open(os.path.join(os.path.dirname(os.path.abspath(__file__)), "profile.xcu"), encoding="utf-8") as f:
            text = f.read().replace("LOCALE", locale).replace("FOLDER", folder)
        with open(os.path.join(profile, "user", "registrymodifications.xcu"), "w", encoding="utf-8") as f:
            f.write(text)
        pipe = "limitary%d" % os.getpid()
        # A session of its own: soffice is a script that starts others, and all of them must end with it.
        self.process = subprocess.Popen(
            ["soffice", "--headless", "--norestore", "--nologo", "--nofirststartwizard", "-env:UserInstallation=" + url(profile),
             "--accept=pipe,name=%s;urp" % pipe],
            stdin=subprocess.DEVNULL, stdout=sys.stderr, start_new_session=True)
        self.watchdog = threading.Timer(LIFE_SECONDS, self.kill)
        self.watchdog.daemon = True
        self.watchdog.start()
        self.desktop = None
        self.address = "uno:pipe,name=%s;urp;StarOffice.ComponentContext" % pipe

    def service(self, name):
        return self.context.ServiceManager.createInstanceWithContext(name, self.context)

    def connect(self):
        self.context = self.resolve()
        self.desktop = self.service("com.sun.star.frame.Desktop")

    def resolve(self):
        local = uno.getComponentContext()
        resolver = local.ServiceManager.createInstanceWithContext("com.sun.star.bridge.UnoUrlResolver", local)
        last = time.monotonic() + START_SECONDS
        while True:
            try:
                return resolver.resolve(self.address)
            except NoConnectException:
                if self.process.poll() is not None:
                    raise RuntimeError("soffice ended with %s" % self.process.returncode)
                if time.monotonic() > last:
                    raise
                time.sleep(0.1)

    def kill(self):
        os.killpg(self.process.pid, signal.SIGKILL)

    def end(self):
        try:
            if self.desktop:
                self.desktop.terminate()
        except Exception:
            pass  # the connection breaks while it ends
        try:
            self.process.wait(END_SECONDS if self.desktop else 0)
        except subprocess.TimeoutExpired:
            self.kill()
            self.process.wait()
        self.watchdog.cancel()

    def do_module(self, name, source):
        libraries = self.service("com.sun.star.script.ApplicationScriptLibraryContainer")
        libraries.loadLibrary("Standard")
        library = libraries.getByName("Standard")
        (library.replaceByName if library.hasByName(name) else library.insertByName)(name, source)

    def do_call(self, name, args=()):
        factory = self.context.getValueByName("/singletons/com.sun.star.script.provider.theMasterScriptProviderFactory")
        script = factory.createScriptProvider("").getScript("vnd.sun.star.script:Standard.%s?language=Basic&location=application" % name)
        return script.invoke(tuple(args), (), ())[0]

    def do_open(self, path, filter=None, options=None):
        # UpdateDocMode 3 updates what is linked, as a user does who allows it; 4 runs no question about macros.
        how = [prop("UpdateDocMode", 3), prop("MacroExecutionMode", 4)]
        if filter:
            how += [prop("FilterName", filter), prop("FilterOptions", options)]
        self.doc = self.desktop.loadComponentFromURL(url(path), "_blank", 0, tuple(how))
        if self.doc is None:
            raise RuntimeError("%s does not open" % path)
        return list(self.doc.Sheets.ElementNames)

    def cells(self, sheet, range):
        return self.doc.Sheets.getByName(sheet).getCellRangeByName(range)

    def do_type(self, sheet, cell, text):
        self.cells(sheet, cell).FormulaLocal = text

    def do_set(self, sheet, cell, value, format=None):
        target = self.cells(sheet, cell)
        if isinstance(value, str):
            target.String = value
        else:
            target.Value = value
        if format:
            english = uno.createUnoStruct("com.sun.star.lang.Locale")
            english.Language, english.Country = "en", "US"
            formats = self.doc.NumberFormats
            key = formats.queryKey(format, english, False)
            target.NumberFormat = formats.addNew(format, english) if key < 0 else key

    def do_select(self, sheet, range):
        self.doc.CurrentController.select(self.cells(sheet, range))

    def do_again(self):
        self.doc.calculateAll()

    def do_read(self, sheet, range):
        area = self.cells(sheet, range)
        a = area.RangeAddress
        return [[cell(area.getCellByPosition(x, y)) for x in span(a.StartColumn, a.EndColumn)] for y in span(a.StartRow, a.EndRow)]

    def do_whole(self, sheet):
        cursor = self.doc.Sheets.getByName(sheet).createCursor()
        cursor.gotoEndOfUsedArea(False)
        end = cursor.RangeAddress
        area = self.doc.Sheets.getByName(sheet).getCellRangeByPosition(0, 0, end.EndColumn, end.EndRow)
        rows = [[plain(v, f) for v, f in zip(*both)] for both in zip(area.DataArray, area.FormulaArray)]
        for flags, kind in KINDS:
            for a in area.queryContentCells(flags).RangeAddresses:
                for y in span(a.StartRow, a.EndRow):
                    for x in span(a.StartColumn, a.EndColumn):
                        rows[a.StartRow + y][a.StartColumn + x]["kind"] = kind
        return rows

    def do_close(self):
        self.doc.close(True)
        self.doc = None


# KINDS are the kinds of cells by com.sun.star.sheet.CellFlags.
KINDS = [(1 + 2, "VALUE"), (4, "TEXT"), (16, "FORMULA")]


def plain(value, formula):
    number = value if isinstance(value, float) else 0.0
    return {"kind": "EMPTY", "text": "" if isinstance(value, float) else value, "number": number, "formula": formula}


def span(first, last):
    return range(last - first + 1)


def cell(c):
    kind = c.Type.value
    of = kind
    if kind == "FORMULA":
        of = "VALUE" if c.FormulaResultType2 == 1 else "TEXT"  # com.sun.star.sheet.FormulaResult
    return {"kind": kind, "of": of, "text": c.String, "number": c.Value if of == "VALUE" else 0.0, "error": c.getError(),
            "formula": c.Formula if kind == "FORMULA" else ""}


def answer(office, line):
    request = json.loads(line)
    name = request.pop("do")
    try:
        return {"ok": getattr(office, "do_" + name)(**request)}
    except Exception as e:
        return {"error": "%s: %s %s" % (name, type(e).__name__, e)}


def main():
    out = os.fdopen(os.dup(1), "w", encoding="utf-8")  # soffice must not write among the answers
    signal.signal(signal.SIGTERM, lambda *_: sys.exit(1))
    office = Office(*sys.argv[1:4])
    try:
        office.connect()
        print(json.dumps({"ready": True}), file=out, flush=True)
        for line in sys.stdin:
            print(json.dumps(answer(office, line)), file=out, flush=True)
    finally:
        office.end()


main()
