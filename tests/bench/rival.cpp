// The rival of the bench: thickens a triangle mesh with a general-purpose sparse-voxel library (OpenVDB).
//
// usage: rival SKIN.tri GRID_MM WALL_MM THREADS
//   SKIN.tri: little-endian; u32 vertices, u32 triangles, then f32 x y z (mm) a vertex, u32 a b c a triangle.
// The unsigned distance to the skin is sampled in a band two grid cells wider than half the wall, and its
// surface at half the wall is meshed with adaptivity 0 (the setting that keeps the mesh two-manifold).
// Prints one line of key=value. Time and memory stop before the mesh is welded and counted.
#include <openvdb/openvdb.h>
#include <openvdb/tools/MeshToVolume.h>
#include <openvdb/tools/VolumeToMesh.h>
#include <sys/resource.h>
#include <tbb/global_control.h>

#include <algorithm>
#include <array>
#include <chrono>
#include <cstdint>
#include <cstdio>
#include <cstdlib>
#include <cstring>
#include <fstream>
#include <iostream>
#include <numeric>
#include <string>
#include <vector>

namespace {

double cpu_seconds() {
    rusage u{};
    getrusage(RUSAGE_SELF, &u);
    const auto s = [](const timeval& t) { return double(t.tv_sec) + 1e-6 * double(t.tv_usec); };
    return s(u.ru_utime) + s(u.ru_stime);
}

// The high-water mark of this process, MiB; 0 when the system does not tell.
double peak_mib() {
    std::ifstream status("/proc/self/status");
    for (std::string line; std::getline(status, line);)
        if (line.rfind("VmHWM:", 0) == 0) return std::strtod(line.c_str() + 6, nullptr) / 1024.0;
    return 0;
}

struct Count {
    std::size_t triangles = 0, shells = 0, bad_edges = 0;
    long long euler = 0;
};

// Welds bit-equal points, as a reader of an STL file does, and counts what is there.
Count count(const std::vector<openvdb::Vec3s>& points, const std::vector<std::array<std::uint32_t, 3>>& tris) {
    std::vector<std::uint32_t> order(points.size()), welded(points.size());
    std::iota(order.begin(), order.end(), 0u);
    const auto key = [&](std::uint32_t i) { return std::array<float, 3>{points[i][0], points[i][1], points[i][2]}; };
    std::sort(order.begin(), order.end(), [&](auto a, auto b) { return key(a) < key(b); });
    std::uint32_t distinct = 0;
    for (std::size_t k = 0; k < order.size(); ++k) {
        if (k > 0 && key(order[k]) != key(order[k - 1])) ++distinct;
        welded[order[k]] = distinct;
    }
    std::vector<std::uint32_t> parent(order.empty() ? 0 : distinct + 1);
    std::iota(parent.begin(), parent.end(), 0u);
    const auto find = [&](std::uint32_t x) {
        while (parent[x] != x) x = parent[x] = parent[parent[x]];
        return x;
    };
    Count c;
    std::vector<std::uint64_t> edges;
    edges.reserve(3 * tris.size());
    std::vector<bool> used(parent.size(), false);
    for (const auto& t : tris) {
        const std::uint32_t v[3] = {welded[t[0]], welded[t[1]], welded[t[2]]};
        if (v[0] == v[1] || v[1] == v[2] || v[2] == v[0]) continue;
        ++c.triangles;
        for (int k = 0; k < 3; ++k) {
            const std::uint32_t a = v[k], b = v[(k + 1) % 3];
            used[a] = true;
            edges.push_back(std::uint64_t(std::min(a, b)) << 32 | std::max(a, b));
            parent[find(a)] = find(b);
        }
    }
    std::sort(edges.begin(), edges.end());
    long long distinct_edges = 0;
    for (std::size_t i = 0, j = 0; i < edges.size(); i = j) {
        while (j < edges.size() && edges[j] == edges[i]) ++j;
        ++distinct_edges;
        c.bad_edges += j - i != 2;
    }
    long long vertices = 0;
    for (std::uint32_t i = 0; i < parent.size(); ++i) {
        vertices += used[i];
        c.shells += used[i] && find(i) == i;
    }
    c.euler = vertices - distinct_edges + static_cast<long long>(c.triangles);
    return c;
}

int run(int argc, char** argv) {
    if (argc != 5) {
        std::cerr << "usage: rival SKIN.tri GRID_MM WALL_MM THREADS\n";
        return 2;
    }
    const double h = std::strtod(argv[2], nullptr), wall = std::strtod(argv[3], nullptr);
    const long threads = std::strtol(argv[4], nullptr, 10);
    if (!(h > 0) || !(wall > 0) || threads < 1) {
        std::cerr << "rival: grid, wall and threads must be positive\n";
        return 2;
    }
    const tbb::global_control limit(tbb::global_control::max_allowed_parallelism, std::size_t(threads));
    std::ifstream in(argv[1], std::ios::binary | std::ios::ate);
    const std::uint64_t bytes = in ? std::uint64_t(in.tellg()) : 0;
    std::uint32_t counts[2] = {0, 0};
    in.seekg(0);
    in.read(reinterpret_cast<char*>(counts), sizeof counts);
    if (!in || bytes != 8 + 12 * (std::uint64_t(counts[0]) + counts[1])) {
        std::cerr << "rival: " << argv[1] << " is not a whole skin file\n";
        return 2;
    }
    std::vector<openvdb::Vec3s> points(counts[0]);
    std::vector<openvdb::Vec3I> skin(counts[1]);
    in.read(reinterpret_cast<char*>(points.data()), std::streamsize(points.size() * sizeof(openvdb::Vec3s)));
    in.read(reinterpret_cast<char*>(skin.data()), std::streamsize(skin.size() * sizeof(openvdb::Vec3I)));
    if (!in || skin.empty()) {
        std::cerr << "rival: " << argv[1] << " is not a whole skin file\n";
        return 2;
    }
    openvdb::initialize();

    const double cpu0 = cpu_seconds();
    const auto wall0 = std::chrono::steady_clock::now();
    const auto transform = openvdb::math::Transform::createLinearTransform(h);
    for (auto& p : points) p = openvdb::Vec3s(transform->worldToIndex(openvdb::Vec3d(p)));
    const openvdb::tools::QuadAndTriangleDataAdapter<openvdb::Vec3s, openvdb::Vec3I> mesh(points, skin);
    const float band = float(0.5 * wall / h + 2.0);
    const auto grid = openvdb::tools::meshToVolume<openvdb::FloatGrid>(
        mesh, *transform, band, band, openvdb::tools::UNSIGNED_DISTANCE_FIELD);
    std::vector<openvdb::Vec3s> vertices;
    std::vector<openvdb::Vec3I> flat;
    std::vector<openvdb::Vec4I> quads;
    openvdb::tools::volumeToMesh(*grid, vertices, flat, quads, 0.5 * wall, 0.0);
    std::vector<std::array<std::uint32_t, 3>> tris;
    tris.reserve(flat.size() + 2 * quads.size());
    for (const auto& t : flat) tris.push_back({t[0], t[1], t[2]});
    for (const auto& q : quads) {
        tris.push_back({q[0], q[1], q[2]});
        tris.push_back({q[0], q[2], q[3]});
    }
    const double cpu = cpu_seconds() - cpu0;
    const double seconds = std::chrono::duration<double>(std::chrono::steady_clock::now() - wall0).count();
    const double peak = peak_mib();

    const Count c = count(vertices, tris);
    std::printf("cpu_s=%.3f wall_s=%.3f peak_mib=%.1f sample_s=0 input=%zu triangles=%zu shells=%zu euler=%lld bad_edges=%zu\n",
                cpu, seconds, peak, skin.size(), c.triangles, c.shells, c.euler, c.bad_edges);
    return 0;
}

}  // namespace

int main(int argc, char** argv) {
    try {
        return run(argc, argv);
    } catch (const std::exception& e) {
        std::cerr << "rival: " << e.what() << "\n";
        return 2;
    }
}
