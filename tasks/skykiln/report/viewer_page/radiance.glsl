#version 300 es
// Radiance in every pixel, from the packed textures: the sky, or the quay scene that it lights.
// Written as the bits of float32, so that no extension for float targets is needed to read it back.
precision highp float;
precision highp int;
precision highp samplerCube;
precision highp sampler2D;

uniform samplerCube specular_map;    // one roughness per level
uniform samplerCube irradiance_map;  // E, not E / pi
uniform sampler2D brdf_map;          // x: n.v, y: roughness; scale and bias of F0
uniform vec3 specular_signs;         // cube_axes of each file
uniform vec3 irradiance_signs;
uniform float true_scale;            // 2^storage_ev
uniform int level_count;
uniform float roughness_of[16];
uniform float sky_level;             // level of detail of what is seen of the sky itself

uniform vec2 picture_size;
uniform vec3 eye, ahead, right, up;
uniform float reach;                 // tangent of half the field of view
uniform bool with_scene;

uniform vec4 shape_start[SHAPES];    // and radius, 0 for a box
uniform vec3 shape_end[SHAPES];
uniform vec3 shape_albedo[SHAPES];
uniform vec3 shape_f0[SHAPES];
uniform vec2 shape_roughness[SHAPES];

out uvec4 value;

const float PI = 3.14159265358979;
const float FAR = 1e30;

float level_of(float roughness) {
    if (roughness <= roughness_of[0]) return 0.0;
    for (int k = 1; k < level_count; ++k) {
        float low = roughness_of[k - 1], high = roughness_of[k];
        if (roughness <= high) return float(k - 1) + (roughness - low) / (high - low);
    }
    return float(level_count - 1);
}

vec3 sky(vec3 direction, float level) {
    return true_scale * textureLod(specular_map, specular_signs * direction, level).rgb;
}

// The split sum: n = v = r in the chain, the rest from the table.
vec3 lit(vec3 n, vec3 v, vec3 albedo, vec3 f0, float roughness) {
    vec2 brdf = textureLod(brdf_map, vec2(max(dot(n, v), 0.0), roughness), 0.0).rg;
    vec3 e = true_scale * textureLod(irradiance_map, irradiance_signs * n, 0.0).rgb;
    return albedo / PI * e + sky(reflect(-v, n), level_of(roughness)) * (f0 * brdf.x + brdf.y);
}

// Where o + t r comes within `radius` of the origin; o and r are across an axis, or whole for a ball.
float entry(vec3 o, vec3 r, float radius) {
    float a = dot(r, r);
    if (a < 1e-9) return FAR;
    float t = -dot(o, r) / a;
    vec3 nearest = o + t * r;
    float root = radius * radius - dot(nearest, nearest);
    if (root <= 0.0) return FAR;
    t -= sqrt(root / a);
    return t > 0.0 ? t : FAR;
}

float rod(vec3 start, vec3 end, float radius, vec3 ray, out vec3 n) {
    float size = distance(start, end);
    vec3 axis = size > 0.0 ? (end - start) / size : vec3(0.0);
    vec3 o = eye - start;
    float along_eye = dot(o, axis), along_ray = dot(ray, axis);
    float t = entry(o - along_eye * axis, ray - along_ray * axis, radius);
    float share = along_eye + t * along_ray;
    if (t < FAR && (share <= 0.0 || share >= size)) t = FAR;
    t = min(t, min(entry(o, ray, radius), entry(eye - end, ray, radius)));
    vec3 point = o + t * ray;
    n = (point - clamp(dot(point, axis), 0.0, size) * axis) / radius;
    return t;
}

float box(vec3 low, vec3 high, vec3 ray, out vec3 n) {
    vec3 a = (low - eye) / ray, b = (high - eye) / ray;
    vec3 enters = min(a, b), leaves = max(a, b);
    float t = max(enters.x, max(enters.y, enters.z));
    n = -sign(ray) * vec3(equal(enters, vec3(t)));
    return t > 0.0 && t < min(leaves.x, min(leaves.y, leaves.z)) ? t : FAR;
}

void main() {
    vec2 place = (2.0 * gl_FragCoord.xy - picture_size) / picture_size.y * reach;
    vec3 ray = normalize(ahead + place.x * right + place.y * up);
    float nearest = FAR;
    int met = -1;
    vec3 n = vec3(0.0);
    for (int k = 0; with_scene && k < SHAPES; ++k) {
        vec3 normal;
        float radius = shape_start[k].w;
        float t = radius > 0.0 ? rod(shape_start[k].xyz, shape_end[k], radius, ray, normal)
                               : box(shape_start[k].xyz, shape_end[k], ray, normal);
        if (t < nearest) { nearest = t; met = k; n = normal; }
    }
    vec3 radiance;
    if (met < 0) {
        radiance = sky(ray, sky_level);
    } else {
        vec3 way = shape_end[met] - shape_start[met].xyz;
        if (shape_start[met].w == 0.0) way *= vec3(1.0, 0.0, 0.0);
        vec3 point = eye + nearest * ray - shape_start[met].xyz;
        float share = clamp(dot(point, way) / max(dot(way, way), 1e-9), 0.0, 1.0);
        float roughness = mix(shape_roughness[met].x, shape_roughness[met].y, share);
        radiance = lit(n, -ray, shape_albedo[met], shape_f0[met], roughness);
    }
    value = uvec4(floatBitsToUint(radiance), uint(met + 1));
}
