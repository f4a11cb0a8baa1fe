#version 300 es
// Radiance for a screen: tone mapped, or its luminance in false colours. Both end in sRGB.
precision highp float;
precision highp int;
precision highp usampler2D;

uniform usampler2D radiance_bits;
uniform float exposure;
uniform mat3 to_rec709;
uniform vec3 luminance_weights;  // of the file's own primaries
uniform bool in_false_colours;
uniform vec3 ramp[RAMP];
uniform float stops, middle_grey;

out vec4 colour;

vec3 encoded(vec3 x) {  // IEC 61966-2-1
    x = clamp(x, 0.0, 1.0);
    return mix(1.055 * pow(x, vec3(1.0 / 2.4)) - 0.055, 12.92 * x, vec3(lessThanEqual(x, vec3(0.0031308))));
}

// x / (1 + x) on the luminance (Reinhard et al. 2002).
vec3 tone_mapped(vec3 radiance) {
    vec3 x = max(to_rec709 * radiance, 0.0) * exposure;
    return x / (1.0 + dot(x, vec3(0.2126, 0.7152, 0.0722))) * 1.25;
}

vec3 false_colour(float luminance) {
    float at = log2(max(luminance * exposure / middle_grey, exp2(-100.0)));
    float place = clamp((at + stops) / (2.0 * stops), 0.0, 1.0) * float(RAMP - 1);
    int low = min(int(place), RAMP - 2);
    return mix(ramp[low], ramp[low + 1], place - float(low));
}

void main() {
    vec3 radiance = uintBitsToFloat(texelFetch(radiance_bits, ivec2(gl_FragCoord.xy), 0).rgb);
    vec3 shown = in_false_colours ? false_colour(dot(radiance, luminance_weights)) : tone_mapped(radiance);
    colour = vec4(encoded(shown), 1.0);
}
