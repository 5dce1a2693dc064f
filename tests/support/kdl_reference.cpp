// SPDX-License-Identifier: GPL-3.0-or-later
// Positions and Jacobians of serial chains from the Orocos kinematics library, for comparison. A
// program of its own: nothing of Leeway is linked in, and the library's own Denavit-Hartenberg
// frames are used, so that neither side can copy a mistake of the other.
//
//   kdl_reference FILE
//
// FILE: "distal" or "proximal", the number of joints n; n lines "R|P a alpha d theta" (the joint's
// own variable is added to theta or d); the number of configurations; n numbers each. Output, one
// line a configuration: rotation (9, row-major), position (3), Jacobian (6 n, row-major, linear
// rows first, base frame, at the tip), with 17 digits. Exit status 2 on anything malformed.
#include <cstddef>
#include <cstdio>
#include <fstream>
#include <iostream>
#include <string>
#include <vector>

#include <kdl/chain.hpp>
#include <kdl/chainfksolverpos_recursive.hpp>
#include <kdl/chainjnttojacsolver.hpp>

namespace {

struct Row {
    char type;
    double a, alpha, d, theta;
};

// Distal: the joint acts about z before the constant step. Proximal: after it, so the constant part
// of the step is the tip of the segment before.
KDL::Chain make_chain(const std::vector<Row> &rows, bool proximal)
{
    KDL::Chain chain;
    const KDL::Joint fixed(KDL::Joint::None);
    for (const Row &row : rows) {
        const KDL::Joint moving(row.type == 'R' ? KDL::Joint::RotZ : KDL::Joint::TransZ);
        if (proximal) {
            chain.addSegment(KDL::Segment(
                fixed, KDL::Frame::DH_Craig1989(row.a, row.alpha, row.d, row.theta)));
            chain.addSegment(KDL::Segment(moving, KDL::Frame::Identity()));
        } else {
            chain.addSegment(
                KDL::Segment(moving, KDL::Frame::DH(row.a, row.alpha, row.d, row.theta)));
        }
    }
    return chain;
}

void print(double value, bool last)
{
    std::printf("%.17g%c", value, last ? '\n' : ' ');
}

int answer(std::istream &in, const KDL::Chain &chain, unsigned n)
{
    KDL::ChainFkSolverPos_recursive position(chain);
    KDL::ChainJntToJacSolver jacobian(chain);
    std::size_t count = 0;
    if (!(in >> count)) {
        return 2;
    }
    for (std::size_t k = 0; k < count; k++) {
        KDL::JntArray q(n);
        for (unsigned i = 0; i < n; i++) {
            if (!(in >> q(i))) {
                return 2;
            }
        }
        KDL::Frame tip;
        KDL::Jacobian j(n);
        if (position.JntToCart(q, tip) < 0 || jacobian.JntToJac(q, j) < 0) {
            return 2;
        }
        for (int r = 0; r < 3; r++) {
            for (int c = 0; c < 3; c++) {
                print(tip.M(r, c), false);
            }
        }
        for (int r = 0; r < 3; r++) {
            print(tip.p(r), false);
        }
        for (unsigned r = 0; r < 6; r++) {
            for (unsigned c = 0; c < n; c++) {
                print(j(r, c), r == 5 && c == n - 1);
            }
        }
    }
    return 0;
}

} // namespace

int main(int argc, char **argv)
{
    if (argc != 2) {
        std::fprintf(stderr, "usage: kdl_reference FILE\n");
        return 2;
    }
    std::ifstream in(argv[1]);
    std::string convention;
    unsigned n = 0;
    if (!(in >> convention >> n) || (convention != "distal" && convention != "proximal") ||
        n == 0 || n > 32) {
        std::fprintf(stderr, "kdl_reference: malformed head in %s\n", argv[1]);
        return 2;
    }
    std::vector<Row> rows;
    for (unsigned i = 0; i < n; i++) {
        Row row{};
        if (!(in >> row.type >> row.a >> row.alpha >> row.d >> row.theta) ||
            (row.type != 'R' && row.type != 'P')) {
            std::fprintf(stderr, "kdl_reference: malformed joint %u\n", i + 1);
            return 2;
        }
        rows.push_back(row);
    }
    const KDL::Chain chain = make_chain(rows, convention == "proximal");
    const int status = answer(in, chain, n);
    if (status != 0) {
        std::fprintf(stderr, "kdl_reference: malformed configurations in %s\n", argv[1]);
    }
    return status;
}
