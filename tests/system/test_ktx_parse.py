"""KTX2 files read by the npm package ktx-parse, an independent parser.

Needs node, and the package in the folder that SKYKILN_NODE_MODULES names; `.ci/run` installs it.
"""

import base64
import json
import os
import subprocess
from pathlib import Path

import numpy as np
import pytest

from skykiln.formats.ktx2 import Ktx2Texture, write_ktx2
from skykiln.formats.pixels import PIXELS

METADATA = {"KTXwriter": "skykiln 0.1.0", "skykiln:probe": '{"name":"Fähre"}'}


def parse(path):
    script = Path(__file__).with_name("read_ktx2.mjs")
    command = ["node", script, os.environ["SKYKILN_NODE_MODULES"], path]
    return json.loads(subprocess.run(command, check=True, capture_output=True).stdout)


@pytest.mark.parametrize("pixels", sorted(PIXELS))
@pytest.mark.parametrize("faces", [6, 1])
def test_outside_parser_finds_what_was_written(tmp_path, pixels, faces):
    coding = PIXELS[pixels]
    rng = np.random.default_rng(4)
    levels = tuple(rng.random((faces, n, n, coding.channels), np.float32) for n in (16, 8, 4, 2, 1))
    path = tmp_path / "sky.ktx2"
    path.write_bytes(write_ktx2(Ktx2Texture(pixels, levels, METADATA)))
    found = parse(path)
    assert found["vkFormat"] == coding.vk_format
    assert found["typeSize"] == coding.type_size
    assert (found["pixelWidth"], found["pixelHeight"], found["pixelDepth"]) == (16, 16, 0)
    assert (found["layerCount"], found["faceCount"], len(found["levels"])) == (0, faces, 5)
    for level, original in zip(found["levels"], levels, strict=True):
        assert base64.b64decode(level["levelData"]) == coding.encode(original).tobytes()
    keys = found["keyValue"]
    assert keys["KTXwriter"] == METADATA["KTXwriter"]
    assert keys["KTXorientation"] == "rd"
    # Keys that KTX 2.0 doesn't define are left as the bytes they are, NUL included.
    assert bytes(keys["skykiln:probe"]) == METADATA["skykiln:probe"].encode() + b"\0"


@pytest.mark.parametrize("pixels", sorted(PIXELS))
def test_outside_parser_finds_the_samples_of_the_descriptor(tmp_path, pixels):
    coding = PIXELS[pixels]
    path = tmp_path / "sky.ktx2"
    level = np.zeros((6, 4, 4, coding.channels), np.float32)
    path.write_bytes(write_ktx2(Ktx2Texture(pixels, (level,))))
    (descriptor,) = parse(path)["dataFormatDescriptor"]
    assert descriptor["colorModel"] == coding.model
    assert (descriptor["colorPrimaries"], descriptor["transferFunction"]) == (1, 1)
    assert descriptor["texelBlockDimension"] == [coding.block_side - 1] * 2 + [0, 0]
    assert descriptor["bytesPlane"][0] == coding.block_bytes
    found = [
        (s["bitOffset"], s["bitLength"], s["channelType"], s["sampleLower"] % 2**32, s["sampleUpper"])
        for s in descriptor["samples"]
    ]
    assert found == [tuple(sample) for sample in coding.samples]
