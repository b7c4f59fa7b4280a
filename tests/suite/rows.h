// SPDX-License-Identifier: Apache-2.0
// The machines' rows, and what they are made of.
#pragma once

#include <string>
#include <vector>

#include "suite/machine.h"

namespace steelyard::suite {

[[nodiscard]] std::vector<Row> trolley_rows();
[[nodiscard]] std::vector<Row> basin_rows();
[[nodiscard]] std::vector<Row> cart_rows();
[[nodiscard]] std::vector<Row> plant_rows();

/// A row of these faults, its class found by what they are: none healthy, more than one pair, a drift of at
/// most 0.5 sd per response time creep, else single.
[[nodiscard]] Row make_row(std::string name, std::vector<Fault> faults, bool noticeable = true);
/// A row without a fault of a channel, in which something is declared wrongly or left out.
[[nodiscard]] Row wrong_row(std::string name, Declaration declared, std::vector<Fault> faults = {});

/// Single faults for a machine's best channel and for another one (its numbers and names).
void add_standard(std::vector<Row>& rows, int best, const std::string& best_name, int other,
                  const std::string& other_name);
/// What the rig says wrongly, for a machine of so many channels: sd of the best one (half, double), unrest
/// and response time (a third, thrice), fault rates (an hour, a year).
void add_wrong(std::vector<Row>& rows, int channels, int best, int other, const std::string& other_name);

/// Two rows in which nothing is wrong but a channel is not what a plain entry in the rig says: undeclared,
/// then declared.
void add_trait(std::vector<Row>& rows, const std::string& name, const Trait& trait, bool Declaration::*how);

}  // namespace steelyard::suite
