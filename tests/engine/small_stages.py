"""Stages that only engine tests know: a number read from a file, doubled, and added up."""

import json
from pathlib import Path

import luigi

from skykiln.engine.stage import Stage
from skykiln.errors import FileError


class Small(Stage):
    """`plan` is JSON: {"folder": ..., "pin": ..., "factor": ..., "note": ...}"""

    plan = luigi.Parameter()
    owner = "numbers"

    @property
    def asked(self):
        return json.loads(self.plan)

    def at(self, name):
        return f"{self.asked['folder']}/{name}"


class ReadNumber(Small):
    """A number and, apart, what else the line says."""

    title = "number"

    def files(self):
        return {"number": self.at("number.json"), "remark": self.at("remark.json")}

    def pins(self):
        return {"source": self.asked["pin"]}

    def make(self, inputs):
        number, _, remark = Path(self.at("source.txt")).read_text().partition(" ")
        if not number.isdecimal():
            raise FileError(f"{self.at('source.txt')}: no number; write one")
        return {"number": {"value": int(number)}, "remark": {"text": remark}}


class Multiply(Small):
    title = "multiple"

    def requires(self):
        return {"number": self.beside(ReadNumber, plan=self.plan)}

    def files(self):
        return {"multiple": self.at("multiple.json")}

    def settings(self):
        return {"factor": self.asked["factor"]}

    def make(self, inputs):
        return {"multiple": {"value": inputs["number"].json()["value"] * self.asked["factor"]}}


class Sum(Small):
    title = "sum"

    def requires(self):
        return {
            "number": self.beside(ReadNumber, plan=self.plan),
            "remark": self.beside(ReadNumber, plan=self.plan),
            "multiple": self.beside(Multiply, plan=self.plan),
        }

    def files(self):
        return {"sum": self.at("sum.json"), "remark": self.at("copied_remark.json")}

    def make(self, inputs):
        total = inputs["number"].json()["value"] + inputs["multiple"].json()["value"]
        return {"sum": {"value": total}, "remark": inputs["remark"].json()}


def sketch_of_sum(folder, pin="1", factor=2, stage=Sum, night=""):
    """The target of a folder whose source.txt is pinned as `pin`."""
    return stage.sketch(night, plan=json.dumps({"folder": str(folder), "pin": pin, "factor": factor}))


def write_source(folder, text):
    (folder / "source.txt").write_text(text)
