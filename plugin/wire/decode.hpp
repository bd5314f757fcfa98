// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <cstddef>
#include <string>
#include <string_view>

#include "model/quantity/result.hpp"
#include "plugin/wire/request.hpp"

/// Bytes to requests. No tree is built from untrusted bytes and nothing is allocated on a size that they declare.
namespace halfturn::wire {

/// What a message may hold at most; past it the fault is `too_large`.
struct DecodeLimits {
  std::size_t bytes = 16u << 20;     // of the whole message
  std::size_t points = 100'000;      // of one row of one scan
  std::size_t sites = 10'000;        // of one scan
  std::size_t scans = 1'000;         // of one joint fit
  std::size_t depth = 8;             // maps and lists inside one another; the deepest that means anything has 5
  std::size_t names = 1'000;         // entries of `ambient` and `pulses`
  std::size_t text = 4'096;          // bytes of one text
};

/// A request, or what is wrong with it.
struct Decoded {
  Encoding encoding = Encoding::msgpack;  // of the message, and so of its reply
  std::string id;                         // as far as it could be read, also of a faulty request
  Result<Request> request;
};

/// Decodes a message: JSON where its first byte is `{`, MessagePack otherwise, with every byte consumed. A request that is
/// returned is complete and consistent (what its kind needs, arrays of one length, counts that fit their shots); faults have
/// the codes of the contract. Of several faults the reported one is, in this order: one that ended the reading (`too_large`,
/// `bad_encoding`), a wrong `proto`, an unknown kind, then the first in the message. Memory stays below 40 times the bytes.
Decoded decode_request(std::string_view bytes, const DecodeLimits& limits);

/// The canonical MessagePack of a scan, which the log stores: fields in the order of the contract, absent ones left out,
/// whole numbers as the shortest integer, others as 64-bit floats, a weight that is the same everywhere as one number.
std::string encode_scan(const Scan& scan);

/// The same of the scans of a joint fit: a map with the one key `scans`; of one scan what encode_scan writes.
std::string encode_scans(const std::vector<Scan>& scans);

/// Reads what encode_scan or encode_scans wrote, and so what the log holds of any fit.
Result<std::vector<Scan>> decode_scans(std::string_view bytes, const DecodeLimits& limits = {});

/// Reads what encode_scan wrote (and any scan object of a `fit`): decode_scan(encode_scan(s)) equals s.
Result<Scan> decode_scan(std::string_view bytes, const DecodeLimits& limits = {});

}  // namespace halfturn::wire
