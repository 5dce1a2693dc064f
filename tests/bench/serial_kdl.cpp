// SPDX-License-Identifier: GPL-3.0-or-later
// KDL's side of bench_serial; see serial_kdl.h. Solvers and arrays are made once.
#include "serial_kdl.h"

#include <cstddef>
#include <kdl/chain.hpp>
#include <kdl/chainfksolverpos_recursive.hpp>
#include <kdl/chainjnttojacsolver.hpp>
#include <memory>

namespace {

struct side {
    KDL::Chain chain;
    KDL::JntArray q;
    KDL::Jacobian jac;
    KDL::Frame pose;
    std::unique_ptr<KDL::ChainFkSolverPos_recursive> position;
    std::unique_ptr<KDL::ChainJntToJacSolver> rates;
};

std::unique_ptr<side> it;

void give(const double *q)
{
    for (unsigned j = 0; j < it->q.rows(); j++) {
        it->q(j) = q[j];
    }
    it->position->JntToCart(it->q, it->pose);
}

void take(double tool[12])
{
    for (std::size_t i = 0; i < 9; i++) {
        tool[i] = it->pose.M.data[i];
    }
    for (std::size_t i = 0; i < 3; i++) {
        tool[9 + i] = it->pose.p.data[i];
    }
}

} // namespace

// A segment is a joint about a point of the last tip, then the way to the next tip. Tips stand at
// the joints' points with the fixed frame's axes, so that every segment is as plain as it can be.
extern "C" void kdl_chain(size_t n, const double *at_m, const double *axis, const bool *slides,
                          const double rot[9], const double pos_m[3])
{
    it = std::make_unique<side>();
    KDL::Vector tip;
    if (n > 0) {
        tip = KDL::Vector(at_m[0], at_m[1], at_m[2]);
        it->chain.addSegment(KDL::Segment(KDL::Joint(KDL::Joint::None), KDL::Frame(tip)));
    }
    for (std::size_t j = 0; j < n; j++) {
        const double *u = axis + 3 * j;
        KDL::Joint joint(KDL::Vector(0, 0, 0), KDL::Vector(u[0], u[1], u[2]),
                         slides[j] ? KDL::Joint::TransAxis : KDL::Joint::RotAxis);
        bool last = j + 1 == n;
        const double *p = last ? pos_m : at_m + 3 * (j + 1);
        KDL::Vector next(p[0], p[1], p[2]);
        KDL::Rotation turn = last ? KDL::Rotation(rot[0], rot[1], rot[2], rot[3], rot[4], rot[5],
                                                  rot[6], rot[7], rot[8])
                                  : KDL::Rotation::Identity();
        it->chain.addSegment(KDL::Segment(joint, KDL::Frame(turn, next - tip)));
        tip = next;
    }
    it->q.resize(static_cast<unsigned>(n));
    it->jac.resize(static_cast<unsigned>(n));
    it->position = std::make_unique<KDL::ChainFkSolverPos_recursive>(it->chain);
    it->rates = std::make_unique<KDL::ChainJntToJacSolver>(it->chain);
}

extern "C" void kdl_pose(const double *q, double tool[12])
{
    give(q);
    take(tool);
}

extern "C" void kdl_both(const double *q, double tool[12], double *jacobian)
{
    give(q);
    take(tool);
    it->rates->JntToJac(it->q, it->jac);
    const unsigned n = it->jac.columns();
    for (unsigned i = 0; i < 6; i++) {
        for (unsigned j = 0; j < n; j++) {
            jacobian[i * n + j] = it->jac(i, j);
        }
    }
}

extern "C" void kdl_end(void)
{
    it.reset();
}
