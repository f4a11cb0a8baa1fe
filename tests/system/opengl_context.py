"""OpenGL on the CPU for the tests: Mesa's llvmpipe through EGL without a surface.

Needs Debian's libegl1 and libgl1-mesa-dri, and PyOpenGL. PyOpenGL's own glTexImage2D doesn't know the
packed pixel types, so the raw calls are used.
"""

import ctypes
import os

os.environ["PYOPENGL_PLATFORM"] = "egl"
os.environ["EGL_PLATFORM"] = "surfaceless"
os.environ["LIBGL_ALWAYS_SOFTWARE"] = "1"

import numpy as np
from OpenGL import EGL, GL
from OpenGL.GL import shaders
from OpenGL.raw.GL.VERSION.GL_1_1 import glGetTexImage, glTexImage2D
from OpenGL.raw.GL.VERSION.GL_1_3 import glCompressedTexImage2D

# Internal format, format, type of each coding; of BC6H the internal format alone.
FORMATS = {
    "rgba16f": (GL.GL_RGBA16F, GL.GL_RGBA, GL.GL_HALF_FLOAT),
    "rgb9e5": (GL.GL_RGB9_E5, GL.GL_RGB, GL.GL_UNSIGNED_INT_5_9_9_9_REV),
    "r11g11b10f": (GL.GL_R11F_G11F_B10F, GL.GL_RGB, GL.GL_UNSIGNED_INT_10F_11F_11F_REV),
    "bc6h": (GL.GL_COMPRESSED_RGB_BPTC_UNSIGNED_FLOAT,),
}

_SHADER = """
#version 430
layout(local_size_x = 64) in;
layout(binding = 0) uniform samplerCube cube;
layout(std430, binding = 0) buffer Ways { vec4 ways[]; };
layout(std430, binding = 1) buffer Values { vec4 values[]; };
void main() {
    uint i = gl_GlobalInvocationID.x;
    if (i < ways.length()) values[i] = textureLod(cube, ways[i].xyz, ways[i].w);
}
"""


def make_context():
    """A current OpenGL 4.5 core context. Returns the renderer's name."""
    display = EGL.eglGetDisplay(EGL.EGL_DEFAULT_DISPLAY)
    assert EGL.eglInitialize(display, None, None)
    EGL.eglBindAPI(EGL.EGL_OPENGL_API)
    wanted = [EGL.EGL_CONTEXT_MAJOR_VERSION, 4, EGL.EGL_CONTEXT_MINOR_VERSION, 5, EGL.EGL_NONE]
    attributes = (EGL.EGLint * len(wanted))(*wanted)
    context = EGL.eglCreateContext(display, EGL.EGLConfig(), EGL.EGL_NO_CONTEXT, attributes)
    assert EGL.eglMakeCurrent(display, EGL.EGL_NO_SURFACE, EGL.EGL_NO_SURFACE, context)
    GL.glEnable(GL.GL_TEXTURE_CUBE_MAP_SEAMLESS)
    return GL.glGetString(GL.GL_RENDERER).decode()


def upload_cube(pixels, size, images):
    """A cube texture from the bytes images[level][face]."""
    texture = GL.glGenTextures(1)
    GL.glBindTexture(GL.GL_TEXTURE_CUBE_MAP, texture)
    GL.glPixelStorei(GL.GL_UNPACK_ALIGNMENT, 1)
    for level, faces in enumerate(images):
        for face, image in enumerate(faces):
            _upload(pixels, GL.GL_TEXTURE_CUBE_MAP_POSITIVE_X + face, level, max(1, size >> level), image)
    GL.glTexParameteri(GL.GL_TEXTURE_CUBE_MAP, GL.GL_TEXTURE_MAX_LEVEL, len(images) - 1)
    GL.glTexParameteri(GL.GL_TEXTURE_CUBE_MAP, GL.GL_TEXTURE_MIN_FILTER, GL.GL_LINEAR_MIPMAP_LINEAR)
    GL.glTexParameteri(GL.GL_TEXTURE_CUBE_MAP, GL.GL_TEXTURE_MAG_FILTER, GL.GL_LINEAR)
    assert GL.glGetError() == GL.GL_NO_ERROR
    return texture


def _upload(pixels, target, level, size, image):
    buffer = ctypes.create_string_buffer(image, len(image))
    internal, *external = FORMATS[pixels]
    if external:
        glTexImage2D(target, level, internal, size, size, 0, *external, buffer)
    else:
        glCompressedTexImage2D(target, level, internal, size, size, 0, len(image), buffer)


def sample_texture(texture, directions, levels):
    """`textureLod` of a cube texture at (k, 3) directions and (k,) levels of detail: (k, 4) float32."""
    ways = np.ascontiguousarray(np.concatenate([directions, levels[:, None]], axis=1), np.float32)
    program = shaders.compileProgram(shaders.compileShader(_SHADER, GL.GL_COMPUTE_SHADER))
    buffers = GL.glGenBuffers(2)
    for binding, data in ((0, ways), (1, np.zeros_like(ways))):
        GL.glBindBufferBase(GL.GL_SHADER_STORAGE_BUFFER, binding, buffers[binding])
        GL.glBufferData(GL.GL_SHADER_STORAGE_BUFFER, data.nbytes, data, GL.GL_STATIC_READ)
    GL.glActiveTexture(GL.GL_TEXTURE0)
    GL.glBindTexture(GL.GL_TEXTURE_CUBE_MAP, texture)
    GL.glUseProgram(program)
    GL.glDispatchCompute((len(ways) + 63) // 64, 1, 1)
    GL.glMemoryBarrier(GL.GL_BUFFER_UPDATE_BARRIER_BIT)
    raw = GL.glGetBufferSubData(GL.GL_SHADER_STORAGE_BUFFER, 0, ways.nbytes)
    return np.frombuffer(raw, np.float32).reshape(-1, 4)


_FOR_EACH = """
layout(local_size_x = 64) in;
layout(std430, binding = 0) buffer A { vec4 a_of[]; };
layout(std430, binding = 1) buffer B { vec4 b_of[]; };
layout(std430, binding = 2) buffer Values { vec4 values[]; };
void main() {
    uint i = gl_GlobalInvocationID.x;
    if (i >= a_of.length()) return;
    vec4 a = a_of[i], b = b_of[i];
    values[i] = vec4(%s, 0.0);
}
"""


def run_for_each(functions, expressions, a, b, textures, uniforms):
    """Values of GLSL expressions of `a` and `b`, for every row of these.

    Parameters: functions : GLSL that the expressions call; expressions : each a vec3
                a : (k, 3), b : (k, 4); textures : by unit; uniforms : by name
    Returns:    (expressions, k, 3) float32
    """
    return np.stack([_values_of(functions, one, a, b, textures, uniforms) for one in expressions])


def _values_of(functions, expression, a, b, textures, uniforms):
    source = "#version 430\n" + functions + _FOR_EACH % expression
    program = shaders.compileProgram(shaders.compileShader(source, GL.GL_COMPUTE_SHADER))
    GL.glUseProgram(program)
    for unit, texture in textures.items():
        GL.glActiveTexture(GL.GL_TEXTURE0 + unit)
        target = GL.GL_TEXTURE_2D if unit == 2 else GL.GL_TEXTURE_CUBE_MAP
        GL.glBindTexture(target, texture)
    for name, value in uniforms.items():
        _set_uniform(GL.glGetUniformLocation(program, name), value)
    rows = np.float32(np.c_[a, np.zeros(len(a))]), np.float32(b), np.zeros((len(a), 4), np.float32)
    for binding, data in enumerate(rows):
        GL.glBindBufferBase(GL.GL_SHADER_STORAGE_BUFFER, binding, GL.glGenBuffers(1))
        GL.glBufferData(GL.GL_SHADER_STORAGE_BUFFER, data.nbytes, data, GL.GL_STATIC_READ)
    GL.glDispatchCompute((len(a) + 63) // 64, 1, 1)
    GL.glMemoryBarrier(GL.GL_BUFFER_UPDATE_BARRIER_BIT)
    raw = GL.glGetBufferSubData(GL.GL_SHADER_STORAGE_BUFFER, 0, rows[2].nbytes)
    GL.glActiveTexture(GL.GL_TEXTURE0)
    return np.frombuffer(raw, np.float32).reshape(-1, 4)[:, :3]


def _set_uniform(place, value):
    """An int, a float, a vec3, or an array of floats or vec3; one that the program leaves out is at -1."""
    array = np.atleast_1d(np.float32(value))
    if isinstance(value, int):
        GL.glUniform1i(place, value)
    elif array.shape[-1] == 3:
        GL.glUniform3fv(place, array.size // 3, array)
    else:
        GL.glUniform1fv(place, array.size, array)


def read_level(texture, level, size):
    """What the driver decoded of a level: (6, size, size, 3) float32."""
    GL.glBindTexture(GL.GL_TEXTURE_CUBE_MAP, texture)
    faces = [
        GL.glGetTexImage(GL.GL_TEXTURE_CUBE_MAP_POSITIVE_X + face, level, GL.GL_RGB, GL.GL_FLOAT)
        for face in range(6)
    ]
    return np.stack([np.frombuffer(face, np.float32).reshape(size, size, 3) for face in faces])


def words_that_the_driver_packs(colours):
    """The driver's own rgb9e5 words of (n, n, 3) float32 colours: (n, n) uint32."""
    texture = GL.glGenTextures(1)
    GL.glBindTexture(GL.GL_TEXTURE_2D, texture)
    size, data = len(colours), np.ascontiguousarray(colours, np.float32)
    pointer = data.ctypes.data_as(ctypes.c_void_p)
    glTexImage2D(GL.GL_TEXTURE_2D, 0, GL.GL_RGB9_E5, size, size, 0, GL.GL_RGB, GL.GL_FLOAT, pointer)
    words = np.empty((size, size), np.uint32)
    target = words.ctypes.data_as(ctypes.c_void_p)
    glGetTexImage(GL.GL_TEXTURE_2D, 0, GL.GL_RGB, GL.GL_UNSIGNED_INT_5_9_9_9_REV, target)
    assert GL.glGetError() == GL.GL_NO_ERROR
    return words
