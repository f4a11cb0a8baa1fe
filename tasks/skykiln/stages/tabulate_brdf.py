"""TabulateBrdf: the split-sum table and the sheen albedo that all probes share, published at once."""

import luigi

from ..engine.digests import digest_chunks
from ..engine.stage import Stage

TABLE_FILE = "brdf.rg16f.ktx2"
SHEEN_FILE = "sheen.r16f.ktx2"


class TabulateBrdf(Stage):
    """The tables as textures, and the first one's albedos as JSON."""

    version = 2
    published = True
    build_dir = luigi.Parameter()
    size = luigi.IntParameter()

    owner = "all probes"
    title = "BRDF table"

    def files(self):
        return {name: f"{self.build_dir}/brdf/{name}" for name in (TABLE_FILE, SHEEN_FILE, "brdf.json")}

    @property
    def stamp_path(self):
        return f"{self.build_dir}/work/{TABLE_FILE}.stamp"

    def settings(self):
        return {"size": self.size}

    def make(self, inputs):
        from ..light.brdf import average_albedo, brdf_table, directional_albedo
        from ..light.sheen import sheen_albedo

        table = brdf_table(self.size)
        texture = self._texture("rg16f", table)
        sheen = self._texture("r16f", sheen_albedo(self.size)[..., None])
        record = {
            "schema": 1,
            "size": self.size,
            **_listed(TABLE_FILE, "rg16f", texture),
            "directional_albedo": directional_albedo(table).round(7).tolist(),
            "average_albedo": average_albedo(table).round(7).tolist(),
            "sheen": _listed(SHEEN_FILE, "r16f", sheen),
        }
        return {TABLE_FILE: texture, SHEEN_FILE: sheen, "brdf.json": record}

    def _texture(self, pixels, table):
        from ..formats.ktx2 import Ktx2Texture, write_ktx2

        metadata = {"KTXwriter": f"skykiln TabulateBrdf {self.version}"}
        return write_ktx2(Ktx2Texture(pixels, (table[None].astype("float32"),), metadata))


def _listed(file, pixels, data):
    return {
        "file": file,
        "container": "ktx2",
        "pixels": pixels,
        "bytes": len(data),
        "digest": digest_chunks([data]),
    }
