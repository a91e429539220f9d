"""A browser driven over the WebDriver protocol (W3C), with nothing but Python's standard library."""
import base64
import http.client
import json
import os
import shutil
import subprocess
import tempfile
import time

ARGUMENTS = ["--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run",
             "--disable-background-networking", "--disable-component-update", "--disable-sync", "--disable-dev-shm-usage",
             "--force-device-scale-factor=1"]
ELEMENT = "element-6066-11e4-a52e-4f735466cecf"
LEFT, RIGHT = "\ue012", "\ue014"


class Failure(Exception):
    """The browser refused a command."""


class Browser:
    """One headless Chromium with its own empty profile; close() ends it and its driver."""

    def __init__(self, width=1280, height=900, dark=False):
        self.profile = tempfile.mkdtemp(prefix="leastwise-page-")
        self.driver = subprocess.Popen(["chromedriver", "--port=0"], stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True)
        self.session = None
        try:
            self.port = self._port()
            arguments = ARGUMENTS + [f"--user-data-dir={self.profile}", f"--window-size={width},{height}"]
            if dark:
                arguments.append("--blink-settings=preferredColorScheme=0")
            wanted = {"capabilities": {"alwaysMatch": {
                "browserName": "chrome",
                "goog:loggingPrefs": {"browser": "ALL", "performance": "ALL"},
                "goog:chromeOptions": {"args": arguments}}}}
            self.session = self._send("POST", "/session", wanted)["sessionId"]
        except BaseException:
            self.close()
            raise

    def _port(self):
        for line in self.driver.stdout:
            if "started successfully on port" in line:
                return int(line.rstrip(". \n").split()[-1])
        raise Failure("chromedriver did not start")

    def _send(self, method, path, body=None):
        connection = http.client.HTTPConnection("127.0.0.1", self.port, timeout=120)
        try:
            text = None if body is None else json.dumps(body)
            connection.request(method, path, text, {"Content-Type": "application/json"})
            value = json.loads(connection.getresponse().read())["value"]
        finally:
            connection.close()
        if isinstance(value, dict) and "error" in value:
            raise Failure(f"{value['error']}: {value.get('message', '')}")
        return value

    def _do(self, method, path, body=None):
        return self._send(method, f"/session/{self.session}{path}", body)

    def open(self, path):
        self._do("POST", "/url", {"url": "file://" + os.path.abspath(path)})
        for _ in range(200):
            if self.run("return document.documentElement.dataset.ready"):
                return
            time.sleep(0.05)
        raise Failure("the page did not become ready")

    def run(self, script, *arguments):
        return self._do("POST", "/execute/sync", {"script": script, "args": list(arguments)})

    def run_async(self, script, *arguments):
        """As run, but the result is what the script hands to its last argument."""
        return self._do("POST", "/execute/async", {"script": script, "args": list(arguments)})

    def size(self, width, height):
        """Size of the page's window; narrower than the smallest window that the browser would make, too."""
        self._do("POST", "/goog/cdp/execute", {"cmd": "Emulation.setDeviceMetricsOverride", "params": {
            "width": width, "height": height, "deviceScaleFactor": 1, "mobile": False}})
        time.sleep(0.4)

    def click(self, selector, number=0):
        found = self._do("POST", "/elements", {"using": "css selector", "value": selector})
        self._do("POST", f"/element/{found[number][ELEMENT]}/click", {})

    def keys(self, *keys):
        actions = [{"type": kind, "value": key} for key in keys for kind in ("keyDown", "keyUp")]
        self._do("POST", "/actions", {"actions": [{"type": "key", "id": "keys", "actions": actions}]})

    def hover(self, selector, across, down):
        """Moves the pointer over the first match, at a share of its width and height."""
        x, y = self.run("const n = document.querySelector(arguments[0]); n.scrollIntoView({block: 'center'});"
                        "const r = n.getBoundingClientRect();"
                        "return [Math.round(r.left + arguments[1] * r.width), Math.round(r.top + arguments[2] * r.height)]",
                        selector, across, down)
        self._do("POST", "/actions", {"actions": [{"type": "pointer", "id": "mouse", "actions": [
            {"type": "pointerMove", "duration": 0, "x": x, "y": y}]}]})
        return x, y

    def print_pdf(self):
        return base64.b64decode(self._do("POST", "/print", {"page": {"width": 21.0, "height": 29.7}}))

    def screenshot(self, path, whole=False):
        if whole:
            height = self.run("return document.documentElement.scrollHeight")
            self.size(self.run("return window.innerWidth"), min(16000, height))
        with open(path, "wb") as file:
            file.write(base64.b64decode(self._do("GET", "/screenshot")))

    def complaints(self):
        """What the console logged as an error since last asked."""
        return [entry["message"] for entry in self._do("POST", "/se/log", {"type": "browser"}) if entry["level"] == "SEVERE"]

    def requests(self):
        """Addresses asked for since last asked, the page's own file, inline data and pages of the browser itself aside."""
        asked = []
        for entry in self._do("POST", "/se/log", {"type": "performance"}):
            message = json.loads(entry["message"])["message"]
            if message["method"] in ("Network.requestWillBeSent", "Network.webSocketCreated"):
                parameters = message["params"]
                asked.append(parameters.get("request", parameters).get("url"))
        return [url for url in asked if not url.startswith(("data:", "blob:", "file:", "chrome:", "about:"))]

    def close(self):
        try:
            if self.session:
                self._do("DELETE", "")
        finally:
            self.driver.terminate()
            self.driver.wait()
            self.driver.stdout.close()
            shutil.rmtree(self.profile, ignore_errors=True)
