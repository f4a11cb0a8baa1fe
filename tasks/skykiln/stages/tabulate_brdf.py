"""TabulateBrdf: the split-sum table that all probes share, published at once."""

import luigi

from ..engine.digests import digest_chunks
from ..engine.stage import Stage

TABLE_FILE = "brdf.rg16f.ktx2"


class TabulateBrdf(Stage):
    """The table as a texture, and its albedos as JSON."""

    version = 1
    published = True
    build_dir = luigi.Parameter()
    size = luigi.IntParameter()

    owner = "all probes"
    title = "BRDF table"

    def files(self):
        return {name: f"{self.build_dir}/brdf/{name}" for name in (TABLE_FILE, "brdf.json")}

    @property
    def stamp_path(self):
        return f"{self.build_dir}/work/{TABLE_FILE}.stamp"

    def settings(self):
        return {"size": self.size}

    def make(self, inputs):
        from ..formats.ktx2 import Ktx2Texture, write_ktx2
        from ..light.brdf import average_albedo, brdf_table, directional_albedo

        table = brdf_table(self.size)
        metadata = {"KTXwriter": f"skykiln TabulateBrdf {self.version}"}
        texture = write_ktx2(Ktx2Texture("rg16f", (table[None].astype("float32"),), metadata))
        record = {
            "schema": 1,
            "size": self.size,
            "file": TABLE_FILE,
            "container": "ktx2",
            "pixels": "rg16f",
            "bytes": len(texture),
            "digest": digest_chunks([texture]),
            "directional_albedo": directional_albedo(table).round(7).tolist(),
            "average_albedo": average_albedo(table).round(7).tolist(),
        }
        return {TABLE_FILE: texture, "brdf.json": record}
