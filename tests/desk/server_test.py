#!/usr/bin/python3
"""The desk's server without a browser: who is let in, what is refused, what is on disk."""

import http.client
import json
import os
import random
import socket
import struct
import threading
import time
import zlib

from support import Desk, Folder, main, quay_in, rondel, sheets_of, until

MARK_COLUMNS = ["image", "u_px", "v_px", "object", "range_m", "bearing_deg"]


def add_mark(desk, u, v, range_m=1.0, expect=(200,)):
    return desk.post("/api/edit", {"kind": "row-add", "file": "marks.csv", "columns": MARK_COLUMNS,
                                   "row": ["", str(u), str(v), "", str(range_m), ""]}, expect)


def png(width, height):
    def chunk(kind, data):
        body = kind + data
        return struct.pack(">I", len(data)) + body + struct.pack(">I", zlib.crc32(body))
    rows = b"".join(b"\0" + bytes([90, 120, 60]) * width for _ in range(height))
    return (b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", struct.pack(">IIBBBBB", width, height, 8, 2, 0, 0, 0))
            + chunk(b"IDAT", zlib.compress(rows)) + chunk(b"IEND", b""))


def strangers_are_refused():
    with Folder() as folder:
        desk = Desk(quay_in(folder))
        try:
            here = f"127.0.0.1:{desk.port}"
            assert desk.request("GET", "/api/bench")[0] == 200
            assert desk.request("GET", "/api/bench", cookie=False)[0] == 401
            assert desk.request("GET", "/", cookie=False)[0] == 401
            assert desk.request("GET", "/assets/desk.js", cookie=False)[0] == 401
            assert desk.request("GET", "/?token=0123", cookie=False)[0] == 401
            for host in ("evil.example", f"evil.example:{desk.port}", "127.0.0.1", "[::1]"):
                assert 400 <= desk.request("GET", "/api/bench", headers={"Host": host})[0] < 500, host
            for origin in ("http://evil.example", f"https://{here}", "null", f"http://localhost:{desk.port}"):
                answer = desk.request("POST", "/api/undo", {}, {"Origin": origin})
                assert answer[0] == 403, (origin, answer)
            assert desk.request("GET", "/api/bench", headers={"Origin": f"http://{here}"})[0] == 200
            status, headers, _ = desk.request("GET", f"/?token={desk.token}", cookie=False)
            assert status == 302 and headers["Location"] == "/"
            for word in ("HttpOnly", "SameSite=Strict"):
                assert word in headers["Set-Cookie"], headers
            status, headers, _ = desk.request("GET", "/")
            assert status == 200 and "frame-ancestors 'none'" in headers["Content-Security-Policy"]
        finally:
            desk.close()


def nothing_outside_the_venue_is_read():
    with Folder() as folder:
        venue = quay_in(folder)
        (folder / "outside").mkdir()
        secret = folder / "outside/secret.png"
        secret.write_bytes(png(320, 240))
        (venue / "frames/noon/link.png").symlink_to(secret)
        (venue / "frames/away").symlink_to(folder / "outside")
        (venue / "results/tables").mkdir(parents=True)
        (venue / "results/tables/link.h").symlink_to(secret)
        desk = Desk(venue)
        try:
            for path in ("/api/frame?image=", "/api/classes?image=", "/api/snap?u_px=1&v_px=1&object=buoy&image=",
                         "/api/artefact?name="):
                for name in ("../outside/secret.png", "frames/../../outside/secret.png", "%2e%2e/outside/secret.png",
                             "frames%2F..%2F..%2Foutside%2Fsecret.png", "..%5coutside%5csecret.png", str(secret), "/etc/passwd",
                             "frames/noon/link.png", "frames/away/secret.png", "link.h", "a%00.png", ""):
                    status, _, body = desk.request("GET", path + name)
                    assert 400 <= status < 500, (path, name, status)
                    assert b"PNG" not in body and b"root:" not in body
            for link in ("frames/noon/link.png", "frames/away/secret.png"):
                assert desk.request("GET", "/api/frame?image=" + link)[0] == 403
            for path in ("/../secret.png", "/assets/../../../secret.png", "/assets/%2e%2e/%2e%2e/secret.png",
                         "/assets//etc/passwd", "/api/../../secret.png"):
                assert desk.request("GET", path)[0] == 404, path
            for name, light in (("../x.png", ""), ("x.png", "../../up"), ("x.png", ".hidden"), ("x.sh", ""),
                                ("a/b.png", ""), ("x.png", "away/..")):
                status, _, _ = desk.request(
                    "POST", f"/api/frames?light={light}&name={name}", png(320, 240))
                assert 400 <= status < 500, (name, light, status)
            assert desk.request("POST", "/api/frames?light=away&name=x.png", png(320, 240))[0] == 403
            assert not (folder / "x.png").exists()
            for file in ("../x.csv", "results/range.yaml", "/etc/passwd", "notes.txt"):
                for body in ({"kind": "text", "file": file, "base": "", "text": "x"},
                             {"kind": "row-add", "file": file, "columns": ["a"], "row": ["b"]},
                             {"kind": "frame-remove", "file": file}):
                    status, _, _ = desk.request("POST", "/api/edit", body)
                    assert 400 <= status < 500, (body, status)
            for word in ("../other", "a/../../b", "%2e%2e/other"):
                assert desk.request("GET", "/api/compare?other=" + word)[0] == 400
            status, _, _ = desk.request("POST", "/api/run", {"step": "check", "batch": "../other"})
            assert status == 400
        finally:
            desk.close()


def bad_requests_are_refused_and_the_desk_goes_on():
    with Folder() as folder:
        venue = quay_in(folder)
        desk = Desk(venue)
        try:
            before = sheets_of(venue)
            for path in ("/api/edit", "/api/preview/range", "/api/preview/colours", "/api/preview/tables",
                         "/api/link", "/api/run", "/api/examine"):
                for body in ("", "{", "[]", "null", "\"text\"", "{\"kind\": 5}", "\xff\xfe", "{}",
                             "{\"kind\":\"row-add\",\"file\":\"marks.csv\",\"columns\":[1],\"row\":[{}]}",
                             "[" * 100000):
                    status, _, answer = desk.request("POST", path, body.encode("latin-1"))
                    if path == "/api/run" and status == 202:
                        continue  # an unknown step is told by its event
                    assert 400 <= status < 500, (path, body[:40], status)
            assert sheets_of(venue) == before
            for row in (["", "nan", "10", "", "1", ""], ["", "10", "10", "", "-1", ""],
                        ["frames/none.png", "10", "10", "", "1", ""], ["", "10", "10", "ghost", "1", ""],
                        ["", "10", "10\nx", "", "1", ""], ["", "1e9", "10", "", "1", ""]):
                status, _, answer = desk.request("POST", "/api/edit", {
                    "kind": "row-add", "file": "marks.csv", "columns": MARK_COLUMNS, "row": row})
                assert 400 <= status < 500, (row, status)
                assert json.loads(answer)["problems"][0], answer
            assert sheets_of(venue) == before
            status, _, answer = desk.request("POST", "/api/frames?light=noon&name=small.png", png(10, 10))
            assert status == 422 and b"320" in answer, answer
            status, _, _ = desk.request("POST", "/api/frames?light=noon&name=torn.png", png(320, 240)[:500])
            assert status == 422
        finally:
            desk.close()


def a_hundred_megabytes_and_ten_thousand_connections():
    with Folder() as folder:
        desk = Desk(quay_in(folder))
        try:
            def quick():
                started = time.monotonic()
                assert desk.request("GET", "/assets/desk.css")[0] == 200
                return time.monotonic() - started

            size = 100 * 1024 * 1024
            sending = socket.create_connection(("127.0.0.1", desk.port))
            sending.sendall((f"POST /api/frames?light=noon&name=big.png HTTP/1.1\r\nHost: 127.0.0.1:{desk.port}\r\n"
                             f"Cookie: {desk.cookie}\r\nContent-Length: {size}\r\n\r\n").encode())
            try:
                block = b"x" * 65536
                for _ in range(size // len(block)):
                    sending.sendall(block)
            except (BrokenPipeError, ConnectionResetError):
                pass  # refused before all of it was sent
            sending.settimeout(20)
            try:
                answer = sending.recv(100)
                assert answer == b"" or b" 413 " in answer, answer
            except (ConnectionResetError, socket.timeout):
                pass
            sending.close()
            quick()
            # Opened and left: as many at once as this process may have open, until it is 10 000.
            open_now, most = [], min(3000, os.sysconf("SC_OPEN_MAX") - 200)
            for i in range(10000):
                one = socket.socket()
                one.setblocking(False)
                try:
                    one.connect(("127.0.0.1", desk.port))
                except BlockingIOError:
                    pass
                open_now.append(one)
                if len(open_now) >= most:
                    open_now.pop(0).close()
                if i % 1000 == 999:
                    quick()
            waits = [quick() for _ in range(10)]
            print(f"     answers among {len(open_now)} idle connections: {max(waits):.3f} s at most")
            for one in open_now:
                one.close()
        finally:
            desk.close()


def undo_and_redo_return_to_the_same_bytes():
    with Folder() as folder:
        venue = quay_in(folder)
        desk = Desk(venue)
        dice = random.Random(4)
        try:
            first = sheets_of(venue)
            for i in range(50):
                bench = desk.bench()
                what = dice.randrange(4)
                if what == 0 or not bench["marks"]:
                    add_mark(desk, 20 + i, 100, 0.5 + 0.01 * i)
                elif what == 1:
                    mark = dice.choice(bench["marks"])
                    desk.post("/api/edit", {
                        "kind": "row-change", "file": "marks.csv", "line": mark["line"], "before": mark["text"],
                        "columns": MARK_COLUMNS,
                        "row": [mark["image"], f"{dice.uniform(30, 280):.2f}", "99.5", mark["object"],
                                f"{dice.uniform(0.2, 3):.3f}", ""]})
                elif what == 2:
                    mark = dice.choice(bench["marks"])
                    desk.post("/api/edit", {"kind": "row-change", "file": "marks.csv", "line": mark["line"],
                                            "before": mark["text"], "row": None})
                else:
                    desk.post("/api/edit", {"kind": "row-add", "file": "strokes.csv",
                                            "columns": ["kind", "width_px", "points"],
                                            "row": ["hide", "5", f"{i} 10 {i + 20} 30"]})
            last = sheets_of(venue)
            assert last != first
            for _ in range(50):
                desk.post("/api/undo")
            assert sheets_of(venue) == first
            assert desk.request("POST", "/api/undo", {})[0] == 422
            for _ in range(50):
                desk.post("/api/redo")
            assert sheets_of(venue) == last
            assert desk.request("POST", "/api/redo", {})[0] == 422
        finally:
            desk.close()


def a_note_column_and_other_orders_stay():
    with Folder() as folder:
        venue = quay_in(folder)
        (venue / "marks.csv").write_text(
            "note,range_m,bearing_deg,u_px,v_px,image,object\r\n\"by the door, left\",0.5,10,200,100,,\r\n")
        desk = Desk(venue)
        try:
            mark = desk.bench()["marks"][0]
            desk.post("/api/edit", {"kind": "row-change", "file": "marks.csv", "line": mark["line"],
                                    "before": mark["text"], "columns": MARK_COLUMNS,
                                    "row": ["", "201.5", "100", "", "0.5", "10"]})
            text = (venue / "marks.csv").read_bytes().decode()
            assert text.endswith("\"by the door, left\",0.5,10,201.5,100,,\r\n"), text
        finally:
            desk.close()


def two_writers_are_merged_or_refused():
    with Folder() as folder:
        venue = quay_in(folder)
        desk = Desk(venue)
        try:
            marks = desk.bench()["marks"]
            a, b = marks[0], marks[1]

            def change(mark, range_m, expect):
                return desk.post("/api/edit", {
                    "kind": "row-change", "file": "marks.csv", "line": mark["line"], "before": mark["text"],
                    "columns": MARK_COLUMNS, "row": [mark["image"], str(mark["u_px"]), str(mark["v_px"]),
                                                     "", str(range_m), str(mark["bearing_deg"])]}, (expect,))
            change(a, 0.777, 200)   # one tab
            change(b, 0.888, 200)   # another that saw the sheet as it was: other rows, so both stay
            change(a, 0.999, 409)   # and one that did not see the first change
            text = (venue / "marks.csv").read_text()
            assert "0.777" in text and "0.888" in text and "0.999" not in text
            # A text editor changes the file: the row is found where it moved to; undo is refused.
            (venue / "marks.csv").write_text(text.replace("image,", "image,", 1) + ",50,60,,1.25,\n")
            status, _, answer = desk.request("POST", "/api/undo", {})
            assert status == 409, answer
            files = desk.bench()["files"]["venue.yaml"]
            (venue / "venue.yaml").write_text(files["text"] + "# by hand\n")
            desk.post("/api/edit", {"kind": "text", "file": "venue.yaml", "base": files["sha"],
                                    "text": files["text"] + "# at the desk\n"}, (409,))
            assert (venue / "venue.yaml").read_text().endswith("# by hand\n")
        finally:
            desk.close()


def every_page_is_told_of_changes():
    with Folder() as folder:
        venue = quay_in(folder)
        desk = Desk(venue)
        heard = []

        def listen():
            with socket.create_connection(("127.0.0.1", desk.port)) as line:
                line.sendall((f"GET /api/events HTTP/1.1\r\nHost: 127.0.0.1:{desk.port}\r\n"
                              f"Cookie: {desk.cookie}\r\n\r\n").encode())
                line.settimeout(60)
                try:
                    while b"event: ended" not in b"".join(heard):
                        got = line.recv(4096)
                        if not got:
                            return
                        heard.append(got)
                except OSError:
                    return

        try:
            listener = threading.Thread(target=listen)
            listener.start()
            until(lambda: b"200 OK" in b"".join(heard) or None, 30, "the events' beginning")
            add_mark(desk, 50, 60)
            until(lambda: b"event: changed" in b"".join(heard), 30, "news of the edit")
            time.sleep(2)  # what the watcher has to say of the same edit
            heard.clear()
            (venue / "strokes.csv").write_text("kind,width_px,points\nhide,4,10 10 20 20\n")
            until(lambda: b"event: changed" in b"".join(heard), 30, "news of the other program's edit")
            desk.post("/api/run", {"step": "nonsense"})
            listener.join(30)
            assert b"is no step" in b"".join(heard)
        finally:
            desk.close()


def killed_in_the_middle_of_edits_the_venue_loads():
    with Folder() as folder:
        venue = quay_in(folder)
        kept = 0
        dice = random.Random(8)
        for _ in range(50):
            desk = Desk(venue)
            acknowledged = []

            def edits():
                try:
                    for i in range(400):
                        add_mark(desk, 10 + i % 300, 50, 1.0)
                        acknowledged.append(i)
                except (OSError, http.client.HTTPException, ValueError):
                    pass  # the server is gone

            busy = threading.Thread(target=edits)
            busy.start()
            until(lambda: acknowledged or not busy.is_alive(), 30, "a first edit")
            time.sleep(dice.uniform(0.0, 0.15))
            desk.kill()
            busy.join()
            desk.process.stdout.close()
            kept += len(acknowledged)
        # All that was answered is there; the one under way when it was killed may be.
        text = (venue / "marks.csv").read_text()
        rows = sum(1 for line in text.splitlines() if line.startswith(","))
        assert kept <= rows <= kept + 50, (kept, rows)
        again = Desk(venue)
        try:
            bench = again.bench()
            assert bench["problems"] == [], bench["problems"]
            assert sum(1 for mark in bench["marks"] if not mark["image"]) == rows
        finally:
            again.close()


def link_keys_are_written_in_place():
    with Folder() as folder:
        venue = quay_in(folder)
        desk = Desk(venue)
        try:
            before = (venue / "venue.yaml").read_text()
            sha = desk.bench()["files"]["venue.yaml"]["sha"]
            desk.post("/api/link", {"near_m": 0.2, "far_m": 2.5, "range_bits": 6, "baud": 57600,
                                    "table_bytes": 900, "base": sha})
            after = (venue / "venue.yaml").read_text()
            expected = (before.replace("near_m: 0.15", "near_m: 0.2").replace("far_m: 3.0", "far_m: 2.5")
                        .replace("range_bits: 7", "range_bits: 6").replace("baud: 115200", "baud: 57600")
                        .replace("table_bytes: 1024", "table_bytes: 900"))
            assert after == expected, after
            desk.post("/api/undo")
            assert (venue / "venue.yaml").read_text() == before
            # Block style, and keys that are not there yet.
            (venue / "venue.yaml").write_text("name: Q\nlink:\n  baud: 115200  # as wired\n")
            (venue / "marks.csv").unlink()
            (venue / "swatches.csv").unlink()
            (venue / "tape.csv").unlink()
            sha = desk.bench()["files"]["venue.yaml"]["sha"]
            desk.post("/api/link", {"near_m": 0.2, "baud": 57600, "table_bytes": 900, "base": sha})
            text = (venue / "venue.yaml").read_text()
            assert text == ("name: Q\nlink:\n  near_m: 0.2\n  baud: 57600  # as wired\n"
                            "budget: {table_bytes: 900}\n"), text
        finally:
            desk.close()


def wrong_starts_are_said():
    with Folder() as folder:
        assert rondel("desk", folder / "none", "--no-open", check=False).returncode == 2
        venue = quay_in(folder)
        for flags in (["--port", "70000"], ["--port", "x"], ["--host", "nowhere.invalid"]):
            done = rondel("desk", venue, "--no-open", *flags, check=False)
            assert done.returncode == 2 and done.stderr.count("\n") >= 1, done
        taken = socket.socket()
        taken.bind(("127.0.0.1", 0))
        taken.listen()
        done = rondel("desk", venue, "--no-open", "--port", taken.getsockname()[1], check=False)
        assert done.returncode == 2 and "--port" in done.stderr
        # A venue with mistakes opens all the same: they are mended there.
        (venue / "venue.yaml").write_text("name: Q\nlinks: {}\n")
        desk = Desk(venue)
        try:
            assert any("links" in line for line in desk.bench()["problems"])
        finally:
            desk.close()


if __name__ == "__main__":
    main([strangers_are_refused, nothing_outside_the_venue_is_read,
          bad_requests_are_refused_and_the_desk_goes_on, a_hundred_megabytes_and_ten_thousand_connections,
          undo_and_redo_return_to_the_same_bytes, a_note_column_and_other_orders_stay,
          two_writers_are_merged_or_refused, every_page_is_told_of_changes,
          killed_in_the_middle_of_edits_the_venue_loads, link_keys_are_written_in_place,
          wrong_starts_are_said])
