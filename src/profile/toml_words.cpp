// What errors say about a TOML file: values as words, the parser's own complaints in our shape.
#include <algorithm>
#include <map>

#include <fmt/core.h>

#include "coldpin/profile/quantities.h"
#include "coldpin/units/error.h"

#include "toml_reader.h"

namespace coldpin::profile {

namespace {

constexpr std::size_t longest_shown = 60;

// Bytes of the UTF-8 sequence that begins `text`; 0 when there is none.
std::size_t sequence_length(std::string_view text) {
    const auto lead = static_cast<unsigned char>(text.front());
    const std::size_t length =
        lead < 0x80
            ? 1
            : (lead >= 0xC2 && lead < 0xE0 ? 2 : (lead >> 4 == 0xE ? 3 : (lead >> 3 == 0x1E ? 4 : 0)));
    if (length == 0 || length > text.size()) return 0;
    for (std::size_t i = 1; i < length; ++i)
        if (static_cast<unsigned char>(text[i]) >> 6 != 2) return 0;
    return length;
}

// The parser's names for the parts of a file, in plain words.
std::string part_words(const std::string& scope) {
    static const std::map<std::string_view, std::string_view> plain = {
        {"string", "text"},
        {"literal string", "text"},
        {"floating-point", "number"},
        {"decimal integer", "whole number"},
        {"key-value pair", "key and its value"}};
    const auto found = plain.find(scope);
    return found != plain.end() ? std::string(found->second) : shown(scope);
}

// "Error while parsing S: expected A, saw B" and its relatives, turned round to "found B, expected A".
std::string reworded(const std::string& description, bool at_line_end) {
    constexpr std::string_view opening = "Error while parsing ";
    std::string part = "piece of text", reason = description;
    const auto colon = description.find(": ");
    if (description.compare(0, opening.size(), opening) == 0 && colon != std::string::npos) {
        part = part_words(description.substr(opening.size(), colon - opening.size()));
        reason = description.substr(colon + 2);
    }
    if (reason.find("end-of-file") != std::string::npos)
        return fmt::format("found the end of the file, expected the rest of a {}", part);
    if (at_line_end && reason.find("control characters") != std::string::npos)
        return fmt::format("found the end of the line, expected the closing quote of a {}", part);
    const auto expected = reason.find("expected "), saw = reason.rfind(", saw ");
    if (expected != std::string::npos && saw != std::string::npos && saw > expected) {
        const std::string seen = reason.substr(saw + 6);
        return fmt::format("found {}, expected {} in a {}",
                           seen == "'\\n'" || seen == "'\\r'" ? "the end of the line" : shown(seen),
                           shown(reason.substr(expected + 9, saw - expected - 9)), part);
    }
    const auto again = reason.find("redefine existing ");
    if (again != std::string::npos)
        return fmt::format("found a second {}, expected each name once", shown(reason.substr(again + 18)));
    return fmt::format("found a {} that cannot be read ({}), expected valid TOML", part, shown(reason));
}

// Whether nothing but a line break is left of a line from that column on. Columns count characters.
bool is_line_end(std::string_view text, toml::source_position where) {
    for (toml::source_index line = 1; line < where.line; ++line) {
        const auto end = text.find('\n');
        if (end == std::string_view::npos) return false;
        text.remove_prefix(end + 1);
    }
    for (toml::source_index column = 1; column < where.column && !text.empty() && text.front() != '\n';
         ++column)
        text.remove_prefix(std::max<std::size_t>(1, sequence_length(text)));
    return text.empty() || text.front() == '\n' || text.front() == '\r';
}

}  // namespace

std::string shown(std::string_view text) {
    std::string out;
    while (!text.empty()) {
        if (out.size() >= longest_shown) return out + "...";
        const std::size_t length = sequence_length(text);
        const auto lead = static_cast<unsigned char>(text.front());
        if (length == 0 || lead < 0x20 || lead == 0x7F)
            out += '?';
        else
            out += text.substr(0, length);
        text.remove_prefix(std::max<std::size_t>(1, length));
    }
    return out;
}

std::string listed(const std::vector<std::string_view>& words) {
    std::string all;
    for (std::size_t i = 0; i < words.size(); ++i)
        all += (i == 0 ? "" : (i + 1 == words.size() ? " or " : ", ")) + std::string(words[i]);
    return all;
}

std::string did_you_mean(std::string_view word, const std::vector<std::string_view>& candidates) {
    std::string near = nearest_word(word, candidates);
    // Names carry units: a key without its unit is the commonest slip, however long the unit.
    for (std::string_view candidate : candidates)
        if (near.empty() && !word.empty() && candidate.substr(0, word.size() + 1) == std::string(word) + "_")
            near = candidate;
    return near.empty() || near == word ? "" : "; did you mean '" + shown(near) + "'?";
}

toml::table parse_toml(const std::string& text, const std::string& source) {
    try {
        return toml::parse(text, source);
    } catch (const toml::parse_error& error) {
        const auto where = error.source().begin;
        throw UsageError(fmt::format("{}:{}:{}: {}", source, std::max(1U, where.line),
                                     std::max(1U, where.column),
                                     reworded(std::string(error.description()), is_line_end(text, where))));
    }
}

}  // namespace coldpin::profile
