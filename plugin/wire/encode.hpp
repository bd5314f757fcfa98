// SPDX-License-Identifier: Apache-2.0
#pragma once
#include <string>

#include "plugin/wire/reply.hpp"

/// Replies and published messages to bytes, with the contract's names. Numbers that are not finite are null.
namespace halfturn::wire {

/// A reply in the encoding of its request. `Stored` is sent as it was stored, with `replayed: true`; the rows of `Rows`
/// likewise without. A stored reply that cannot be read becomes an error `internal`.
std::string encode(const Reply& reply, Encoding encoding);

/// The form of a fitted reply that is stored and given out by `history`: MessagePack, without overlay and without
/// `replayed`.
std::string encode_stored(const Fitted& fitted);

/// Published messages: `boot`, `sequence` and `published_at` before the body. Errors are what `rejected/` carries.
std::string encode_published(const Published& published, const Fitted& fitted, Encoding encoding = Encoding::msgpack);
std::string encode_published(const Published& published, const Live& live, Encoding encoding = Encoding::msgpack);
std::string encode_published(const Published& published, const Drift& drift, Encoding encoding = Encoding::msgpack);
std::string encode_published(const Published& published, const Health& health, Encoding encoding = Encoding::msgpack);
std::string encode_published(const Published& published, const Error& error, Encoding encoding = Encoding::msgpack);

/// A published message from a fitted reply that is stored already: the stored form with `boot`, `sequence`, `published_at`.
std::string encode_published(const Published& published, const Stored& stored, Encoding encoding = Encoding::msgpack);

/// A request as the clients send it; decode_request reads it back.
std::string encode_request(const Request& request, Encoding encoding);

}  // namespace halfturn::wire
