"""What must run after which edit, said a second time: a table of what each stage reads, and bytes.

The model knows nothing of stamps, digests and graphs. It remembers for each stage with which settings,
which version and which bytes of inputs it ran last, and takes the bytes that a stage reads from a bake
into an empty folder.
"""

from pathlib import Path

PACKED = {None: "rgba16f", "mirrored": "mirrored"}


class StalenessModel:
    """The memory of one build folder.

    `last` holds, by label of a stage, what it ran with; `spoiled` the files that something else changed.
    """

    def __init__(self):
        self.last = {}
        self.spoiled = set()

    def bake(self, asked, sources, versions, clean: Path) -> list:
        """Labels of the stages that must run, each once.

        Parameters: asked : what pipeline.yaml holds; sources : name -> bytes, None where it can't be baked
                    versions : name of a stage's class -> version; clean : a bake into an empty folder
        """
        ran = []
        for label, kind, settings, inputs, outputs in _stages(asked, sources):
            name = label.partition(" of ")[2]
            if name in sources and sources[name] is None:
                continue
            now = (versions[kind], settings, [_bytes(item, clean) for item in inputs])
            if self.last.get(label) != now or self.spoiled & set(outputs):
                ran.append(label)
                self.last[label] = now
                self.spoiled -= set(outputs)
        unreadable = [name for name in asked["sources"] if sources[name] is None]
        return ran + [f"panorama of {name}" for name in unreadable]

    def prune(self, asked):
        """Forget what no entry asks for."""
        wanted = {label: outputs for label, _, _, _, outputs in _stages(asked, {})}
        self.last = {label: ran for label, ran in self.last.items() if label in wanted}
        self.spoiled &= {file for outputs in wanted.values() for file in outputs}


def files_of(asked) -> list:
    """All outputs that the entries ask for, below the build folder."""
    return [file for *_, outputs in _stages(asked, {}) for file in outputs]


def _bytes(item, clean):
    return item if isinstance(item, bytes) else (clean / item).read_bytes()


def _stages(asked, sources):
    """(label, class, settings, inputs, outputs) of every stage, what is read before what reads it."""
    table = ["brdf/brdf.rg16f.ktx2", "brdf/sheen.r16f.ktx2", "brdf/brdf.json"]
    yield "BRDF table of all probes", "TabulateBrdf", asked["brdf"]["size"], [], table
    for name, entry in asked["sources"].items():
        yield from _probe_stages(asked, name, entry, sources.get(name))


def _probe_stages(asked, name, entry, source):
    recipe = asked["recipes"][entry["recipe"]]
    work, levels = f"work/{name}", recipe["specular"]["roughness"]
    tolerance, yaw = recipe["specular"]["tolerance"], entry["yaw_deg"]
    pixels, facts = f"{work}/panorama.npy", f"{work}/source.json"
    cube, totals = f"{work}/irradiance.npy", f"{work}/irradiance.json"
    light, repairs = f"{work}/light.json", f"{work}/repairs.npy"
    decoded = [pixels, facts, light, repairs]
    yield f"panorama of {name}", "DecodeSource", entry["exposure_ev"], [source], decoded
    sun = []
    if recipe["sun"]["action"] == "separate":
        sky, sun = f"{work}/sky.npy", [f"{work}/sun.json"]
        yield f"sky without its sun of {name}", "SeparateSun", yaw, [pixels, light], [sky, *sun]
        pixels = sky
    yield f"faces of {name}", "ExtractFaces", (recipe["face_size"], yaw), [pixels], [f"{work}/faces.npy"]
    chain = [f"{work}/faces.npy"]
    for level, roughness in list(enumerate(levels))[1:]:
        chain.append(f"{work}/level_{level}.npy")
        label = f"specular level {level} of {name}"
        settings = (roughness, tolerance, recipe["face_size"], yaw)
        yield label, "FilterLevel", settings, [pixels], chain[-1:]
    sheen, thin = [], recipe.get("sheen") or {"roughness": []}
    for level, roughness in enumerate(thin["roughness"]):
        sheen.append(f"{work}/sheen_{level}.npy")
        settings = (roughness, tolerance, thin["face_size"] >> level, yaw)
        yield f"sheen level {level} of {name}", "FilterSheen", settings, [pixels], sheen[-1:]
    gathered = (recipe["irradiance"]["face_size"], tolerance, yaw)
    yield f"irradiance of {name}", "GatherIrradiance", gathered, [pixels], [cube, totals]
    thumbnails, looks = f"{work}/thumbnails.npy", f"{work}/looks.json"
    pictures = f"report/probes/{name}"
    yield f"pictures of {name}", "DrawProbe", None, chain, [thumbnails, looks, f"{pictures}/small.png"]
    packed = []
    for pack in recipe["pack"]:
        own = PACKED[pack.get("name")]
        names = [f"specular.{own}.ktx2", f"irradiance.{own}.ktx2", f"specular.{own}.ktx2.json"]
        names[2:2] = [f"sheen.{own}.ktx2"] if sheen else []
        files = [f"{work}/packed/{file}" for file in names]
        packed += files
        settings = (pack.get("cube_axes"), tuple(levels), tuple(thin["roughness"]))
        yield f"pack {names[0]} of {name}", "PackProbe", settings, [light, *chain, cube, *sheen], files
    audit, axes = [f"{work}/audit.json"], [pack.get("cube_axes") for pack in recipe["pack"]]
    held = (tuple(levels), tuple(thin["roughness"]), tolerance, yaw, tuple(axes))
    yield f"audit of {name}", "AuditProbe", held, [pixels, *packed], audit
    said = (entry["recipe"], repr(entry["extra"]), tuple(levels), repr(thin), yaw, repr(recipe["pack"]))
    judged = [f"{work}/record.json", f"{work}/judgement.json"]
    compared = [f"{work}/comparison.json", f"{pictures}/change.png"]
    read = [facts, light, *sun, totals, looks, thumbnails, *packed, *audit]
    yield f"judgement of {name}", "JudgeProbe", said, read, [*judged, *compared]
    textures = [file for file in packed if file.endswith(".ktx2")]
    files = [file.replace(f"{work}/packed", f"probes/{name}") for file in textures]
    outputs = [f"{work}/published.npy", *files, f"probes/{name}/probe.json"]
    yield f"published files of {name}", "PublishProbe", None, [*judged, thumbnails, *textures], outputs
