/* Runs a compute shader over a probe's textures, loaded by the listing for Vulkan of docs/for_renderers.md.

   usage: vulkan_listing SHADER.spv SPECULAR IRRADIANCE BRDF UNIFORMS A B VALUES
   Binary files: three KTX2 files, the uniform block, rows of four floats; VALUES is written. */

#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <vulkan/vulkan.h>

#define max(a, b) ((a) > (b) ? (a) : (b))
#define TRY(call) do { VkResult r = (call); if (r) { fprintf(stderr, #call ": %d\n", r); exit(1); } } while (0)
#define MOST_LEVELS 16
enum { TEXTURES = 3, UNIFORMS = 3, A, B, VALUES, BINDINGS };

typedef struct {
    uint8_t identifier[12];
    uint32_t vkFormat, typeSize, pixelWidth, pixelHeight, pixelDepth, layerCount, faceCount, levelCount;
    uint32_t supercompressionScheme, dfdByteOffset, dfdByteLength, kvdByteOffset, kvdByteLength;
    uint64_t sgdByteOffset, sgdByteLength;
} Header;
typedef struct { uint64_t byteOffset, byteLength, uncompressedByteLength; } Level;
typedef struct { uint8_t *bytes; size_t size; } File;
typedef struct { VkBuffer buffer; VkDeviceMemory memory; size_t size; } Buffer;

static VkPhysicalDevice physical;
static VkDevice device;
static VkQueue queue;
static VkCommandBuffer commands;

static File read_file(const char *path) {
    File file = {0};
    FILE *stream = fopen(path, "rb");
    if (!stream) { perror(path); exit(1); }
    fseek(stream, 0, SEEK_END);
    file.size = ftell(stream);
    rewind(stream);
    file.bytes = malloc(file.size);
    if (fread(file.bytes, 1, file.size, stream) != file.size) exit(1);
    fclose(stream);
    return file;
}

static void open_device(void) {
    VkApplicationInfo application = {.sType = VK_STRUCTURE_TYPE_APPLICATION_INFO, .apiVersion = VK_API_VERSION_1_1};
    VkInstanceCreateInfo info = {.sType = VK_STRUCTURE_TYPE_INSTANCE_CREATE_INFO, .pApplicationInfo = &application};
    VkInstance instance;
    TRY(vkCreateInstance(&info, NULL, &instance));
    uint32_t one = 1;
    if (vkEnumeratePhysicalDevices(instance, &one, &physical) < 0 || !one) exit(2);
    VkPhysicalDeviceProperties properties;
    vkGetPhysicalDeviceProperties(physical, &properties);
    printf("%s\n", properties.deviceName);
    float priority = 1;
    VkDeviceQueueCreateInfo queues = {
        .sType = VK_STRUCTURE_TYPE_DEVICE_QUEUE_CREATE_INFO, .queueCount = 1, .pQueuePriorities = &priority};
    VkPhysicalDeviceFeatures features = {.textureCompressionBC = VK_TRUE};
    VkDeviceCreateInfo wanted = {.sType = VK_STRUCTURE_TYPE_DEVICE_CREATE_INFO, .queueCreateInfoCount = 1,
                                 .pQueueCreateInfos = &queues, .pEnabledFeatures = &features};
    TRY(vkCreateDevice(physical, &wanted, NULL, &device));
    vkGetDeviceQueue(device, 0, 0, &queue);
    VkCommandPoolCreateInfo pool_info = {.sType = VK_STRUCTURE_TYPE_COMMAND_POOL_CREATE_INFO,
                                         .flags = VK_COMMAND_POOL_CREATE_RESET_COMMAND_BUFFER_BIT};
    VkCommandPool pool;
    TRY(vkCreateCommandPool(device, &pool_info, NULL, &pool));
    VkCommandBufferAllocateInfo allocate = {.sType = VK_STRUCTURE_TYPE_COMMAND_BUFFER_ALLOCATE_INFO,
                                            .commandPool = pool, .commandBufferCount = 1};
    TRY(vkAllocateCommandBuffers(device, &allocate, &commands));
}

static VkDeviceMemory memory_for(VkMemoryRequirements needs, VkMemoryPropertyFlags flags) {
    VkPhysicalDeviceMemoryProperties kinds;
    vkGetPhysicalDeviceMemoryProperties(physical, &kinds);
    for (uint32_t i = 0; i < kinds.memoryTypeCount; i++) {
        if (!(needs.memoryTypeBits & 1u << i) || (kinds.memoryTypes[i].propertyFlags & flags) != flags) continue;
        VkMemoryAllocateInfo info = {.sType = VK_STRUCTURE_TYPE_MEMORY_ALLOCATE_INFO,
                                     .allocationSize = needs.size, .memoryTypeIndex = i};
        VkDeviceMemory memory;
        TRY(vkAllocateMemory(device, &info, NULL, &memory));
        return memory;
    }
    exit(3);
}

static Buffer buffer_of(const void *bytes, size_t size, VkBufferUsageFlags usage) {
    Buffer made = {.size = size};
    VkBufferCreateInfo info = {.sType = VK_STRUCTURE_TYPE_BUFFER_CREATE_INFO, .size = size, .usage = usage};
    TRY(vkCreateBuffer(device, &info, NULL, &made.buffer));
    VkMemoryRequirements needs;
    vkGetBufferMemoryRequirements(device, made.buffer, &needs);
    made.memory = memory_for(needs, VK_MEMORY_PROPERTY_HOST_VISIBLE_BIT | VK_MEMORY_PROPERTY_HOST_COHERENT_BIT);
    TRY(vkBindBufferMemory(device, made.buffer, made.memory, 0));
    void *place;
    TRY(vkMapMemory(device, made.memory, 0, size, 0, &place));
    memcpy(place, bytes, size);
    vkUnmapMemory(device, made.memory);
    return made;
}

static void begin(void) {
    VkCommandBufferBeginInfo info = {.sType = VK_STRUCTURE_TYPE_COMMAND_BUFFER_BEGIN_INFO};
    TRY(vkBeginCommandBuffer(commands, &info));
}

static void run(void) {
    TRY(vkEndCommandBuffer(commands));
    VkSubmitInfo info = {.sType = VK_STRUCTURE_TYPE_SUBMIT_INFO, .commandBufferCount = 1,
                         .pCommandBuffers = &commands};
    TRY(vkQueueSubmit(queue, 1, &info, VK_NULL_HANDLE));
    TRY(vkQueueWaitIdle(queue));
}

static void change_layout(VkImage image, VkImageSubresourceRange range, VkImageLayout from, VkImageLayout to) {
    VkImageMemoryBarrier barrier = {
        .sType = VK_STRUCTURE_TYPE_IMAGE_MEMORY_BARRIER, .srcAccessMask = VK_ACCESS_MEMORY_WRITE_BIT,
        .dstAccessMask = VK_ACCESS_MEMORY_READ_BIT | VK_ACCESS_MEMORY_WRITE_BIT, .oldLayout = from,
        .newLayout = to, .image = image, .subresourceRange = range};
    vkCmdPipelineBarrier(commands, VK_PIPELINE_STAGE_ALL_COMMANDS_BIT, VK_PIPELINE_STAGE_ALL_COMMANDS_BIT,
                         0, 0, NULL, 0, NULL, 1, &barrier);
}

static VkDescriptorImageInfo load_texture(const char *path) {
    File file = read_file(path);
    Header header;
    Level levels[MOST_LEVELS];
    VkBufferImageCopy copies[MOST_LEVELS];
    memcpy(&header, file.bytes, sizeof header);
    if (header.supercompressionScheme || header.levelCount > MOST_LEVELS) exit(4);
    memcpy(levels, file.bytes + sizeof header, header.levelCount * sizeof *levels);
    uint64_t start = levels[header.levelCount - 1].byteOffset & ~(uint64_t)15;
    Buffer source = buffer_of(file.bytes + start, file.size - start, VK_BUFFER_USAGE_TRANSFER_SRC_BIT);
#include "listing.c"
    VkImage made;
    TRY(vkCreateImage(device, &image, NULL, &made));
    VkMemoryRequirements needs;
    vkGetImageMemoryRequirements(device, made, &needs);
    TRY(vkBindImageMemory(device, made, memory_for(needs, 0), 0));
    VkImageSubresourceRange all = {VK_IMAGE_ASPECT_COLOR_BIT, 0, header.levelCount, 0, header.faceCount};
    begin();
    change_layout(made, all, VK_IMAGE_LAYOUT_UNDEFINED, VK_IMAGE_LAYOUT_TRANSFER_DST_OPTIMAL);
    vkCmdCopyBufferToImage(commands, source.buffer, made, VK_IMAGE_LAYOUT_TRANSFER_DST_OPTIMAL,
                           header.levelCount, copies);
    change_layout(made, all, VK_IMAGE_LAYOUT_TRANSFER_DST_OPTIMAL, VK_IMAGE_LAYOUT_SHADER_READ_ONLY_OPTIMAL);
    run();
    VkImageViewCreateInfo view = {
        .sType = VK_STRUCTURE_TYPE_IMAGE_VIEW_CREATE_INFO, .image = made, .format = image.format,
        .viewType = header.faceCount == 6 ? VK_IMAGE_VIEW_TYPE_CUBE : VK_IMAGE_VIEW_TYPE_2D,
        .subresourceRange = all};
    VkDescriptorImageInfo info = {.imageLayout = VK_IMAGE_LAYOUT_SHADER_READ_ONLY_OPTIMAL};
    TRY(vkCreateImageView(device, &view, NULL, &info.imageView));
    TRY(vkCreateSampler(device, &sampler, NULL, &info.sampler));
    return info;
}

static VkDescriptorType kind_of(int binding) {
    if (binding < TEXTURES) return VK_DESCRIPTOR_TYPE_COMBINED_IMAGE_SAMPLER;
    return binding == UNIFORMS ? VK_DESCRIPTOR_TYPE_UNIFORM_BUFFER : VK_DESCRIPTOR_TYPE_STORAGE_BUFFER;
}

static VkDescriptorSetLayout set_layout(void) {
    VkDescriptorSetLayoutBinding bindings[BINDINGS];
    for (int i = 0; i < BINDINGS; i++)
        bindings[i] = (VkDescriptorSetLayoutBinding){i, kind_of(i), 1, VK_SHADER_STAGE_COMPUTE_BIT, NULL};
    VkDescriptorSetLayoutCreateInfo info = {.sType = VK_STRUCTURE_TYPE_DESCRIPTOR_SET_LAYOUT_CREATE_INFO,
                                            .bindingCount = BINDINGS, .pBindings = bindings};
    VkDescriptorSetLayout layout;
    TRY(vkCreateDescriptorSetLayout(device, &info, NULL, &layout));
    return layout;
}

static VkDescriptorSet filled_set(VkDescriptorSetLayout layout, VkDescriptorImageInfo *images, Buffer *buffers) {
    VkDescriptorPoolSize sizes[] = {{VK_DESCRIPTOR_TYPE_COMBINED_IMAGE_SAMPLER, TEXTURES},
                                    {VK_DESCRIPTOR_TYPE_UNIFORM_BUFFER, 1},
                                    {VK_DESCRIPTOR_TYPE_STORAGE_BUFFER, 3}};
    VkDescriptorPoolCreateInfo info = {.sType = VK_STRUCTURE_TYPE_DESCRIPTOR_POOL_CREATE_INFO, .maxSets = 1,
                                       .poolSizeCount = 3, .pPoolSizes = sizes};
    VkDescriptorPool pool;
    TRY(vkCreateDescriptorPool(device, &info, NULL, &pool));
    VkDescriptorSetAllocateInfo allocate = {.sType = VK_STRUCTURE_TYPE_DESCRIPTOR_SET_ALLOCATE_INFO,
                                            .descriptorPool = pool, .descriptorSetCount = 1,
                                            .pSetLayouts = &layout};
    VkDescriptorSet set;
    TRY(vkAllocateDescriptorSets(device, &allocate, &set));
    for (int i = 0; i < BINDINGS; i++) {
        VkDescriptorBufferInfo whole = {.range = VK_WHOLE_SIZE};
        if (i >= TEXTURES) whole.buffer = buffers[i - TEXTURES].buffer;
        VkWriteDescriptorSet write = {
            .sType = VK_STRUCTURE_TYPE_WRITE_DESCRIPTOR_SET, .dstSet = set, .dstBinding = i,
            .descriptorCount = 1, .descriptorType = kind_of(i),
            .pImageInfo = i < TEXTURES ? images + i : NULL, .pBufferInfo = i < TEXTURES ? NULL : &whole};
        vkUpdateDescriptorSets(device, 1, &write, 0, NULL);
    }
    return set;
}

static void dispatch(File shader, VkDescriptorSetLayout layout, VkDescriptorSet set, uint32_t groups) {
    VkShaderModuleCreateInfo module_info = {.sType = VK_STRUCTURE_TYPE_SHADER_MODULE_CREATE_INFO,
                                            .codeSize = shader.size, .pCode = (uint32_t *)shader.bytes};
    VkShaderModule module;
    TRY(vkCreateShaderModule(device, &module_info, NULL, &module));
    VkPipelineLayoutCreateInfo layout_info = {.sType = VK_STRUCTURE_TYPE_PIPELINE_LAYOUT_CREATE_INFO,
                                              .setLayoutCount = 1, .pSetLayouts = &layout};
    VkPipelineLayout pipeline_layout;
    TRY(vkCreatePipelineLayout(device, &layout_info, NULL, &pipeline_layout));
    VkComputePipelineCreateInfo info = {
        .sType = VK_STRUCTURE_TYPE_COMPUTE_PIPELINE_CREATE_INFO, .layout = pipeline_layout,
        .stage = {.sType = VK_STRUCTURE_TYPE_PIPELINE_SHADER_STAGE_CREATE_INFO,
                  .stage = VK_SHADER_STAGE_COMPUTE_BIT, .module = module, .pName = "main"}};
    VkPipeline pipeline;
    TRY(vkCreateComputePipelines(device, VK_NULL_HANDLE, 1, &info, NULL, &pipeline));
    begin();
    vkCmdBindPipeline(commands, VK_PIPELINE_BIND_POINT_COMPUTE, pipeline);
    vkCmdBindDescriptorSets(commands, VK_PIPELINE_BIND_POINT_COMPUTE, pipeline_layout, 0, 1, &set, 0, NULL);
    vkCmdDispatch(commands, groups, 1, 1);
    run();
}

int main(int count, char **paths) {
    if (count != 9) return 5;
    open_device();
    VkDescriptorImageInfo images[TEXTURES];
    for (int i = 0; i < TEXTURES; i++) images[i] = load_texture(paths[2 + i]);
    File uniforms = read_file(paths[5]), a = read_file(paths[6]), b = read_file(paths[7]);
    Buffer buffers[] = {
        buffer_of(uniforms.bytes, uniforms.size, VK_BUFFER_USAGE_UNIFORM_BUFFER_BIT),
        buffer_of(a.bytes, a.size, VK_BUFFER_USAGE_STORAGE_BUFFER_BIT),
        buffer_of(b.bytes, b.size, VK_BUFFER_USAGE_STORAGE_BUFFER_BIT),
        buffer_of(a.bytes, a.size, VK_BUFFER_USAGE_STORAGE_BUFFER_BIT),
    };
    VkDescriptorSetLayout layout = set_layout();
    dispatch(read_file(paths[1]), layout, filled_set(layout, images, buffers), (a.size / 16 + 63) / 64);
    void *values;
    TRY(vkMapMemory(device, buffers[VALUES - TEXTURES].memory, 0, a.size, 0, &values));
    FILE *out = fopen(paths[8], "wb");
    if (!out || fwrite(values, 1, a.size, out) != a.size || fclose(out)) return 6;
    return 0;
}
