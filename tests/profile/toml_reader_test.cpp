#include "toml_reader.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "coldpin/units/error.h"

#include "refusal.h"

namespace coldpin::profile {
namespace {

using tests::refusal;

// What `read` says about a document, read as "f.toml".
std::string said(const std::string& text, const std::function<void(TableReader&)>& read) {
    return refusal([&] {
        const toml::table document = parse_toml(text, "f.toml");
        TableReader reader(document, "f.toml", "");
        read(reader);
    });
}
std::string syntax(const std::string& text) {
    return refusal([&] { parse_toml(text, "f.toml"); });
}

TEST(TomlReaderTest, GivesTypedValuesBack) {
    const toml::table document = parse_toml(
        "a = 3\nb = 2.5\nc = \"text\"\nd = true\ne = [1, 2.5]\nf = 7\ng = [\"x\", \"y\"]\nh = [3, 4.0]\n",
        "f");
    TableReader reader(document, "f", "");
    EXPECT_EQ(reader.number("a"), 3.0);  // a whole number serves as a number
    EXPECT_EQ(reader.need_number("b"), 2.5);
    EXPECT_EQ(reader.text("c"), "text");
    EXPECT_EQ(reader.flag("d"), true);
    EXPECT_EQ(reader.numbers("e"), (std::vector<double>{1.0, 2.5}));
    EXPECT_EQ(reader.numbers("f"), std::vector<double>{7.0});
    EXPECT_EQ(reader.texts("g"), (std::vector<std::string>{"x", "y"}));
    EXPECT_EQ(reader.whole_numbers("h", 1, 9), (std::vector<int>{3, 4}));
    EXPECT_EQ(reader.number("missing"), std::nullopt);
    EXPECT_EQ(reader.text("missing"), std::nullopt);
    EXPECT_EQ(reader.whole("missing", 0, 1), std::nullopt);
    EXPECT_EQ(reader.flag("missing"), std::nullopt);
    EXPECT_TRUE(reader.texts("missing").empty());
    EXPECT_EQ(refusal([&] { reader.finish(); }), "accepted");
}

TEST(TomlReaderTest, NumbersKeepTheirEndsAndNothingBeyond) {
    const auto ask = [](TableReader& top) { top.number("a", {-1.0, 2.0}); };
    EXPECT_EQ(said("a = -1", ask), "accepted");
    EXPECT_EQ(said("a = 2.0", ask), "accepted");
    EXPECT_EQ(said("\na = 2.001", ask), "f.toml:2:5: a: found 2.001, expected a number from -1 to 2");
    EXPECT_EQ(said("a = -1.5", ask), "f.toml:1:5: a: found -1.5, expected a number from -1 to 2");
}

TEST(TomlReaderTest, NothingButAFiniteNumberIsANumber) {
    const auto ask = [](TableReader& top) { top.number("a"); };
    EXPECT_EQ(said("a = nan", ask), "f.toml:1:5: a: found a value that is not finite, expected a number");
    EXPECT_EQ(said("a = -inf", ask), "f.toml:1:5: a: found a value that is not finite, expected a number");
    EXPECT_EQ(said("a = \"3\"", ask), "f.toml:1:5: a: found the text '3', expected a number");
    EXPECT_EQ(said("a = true", ask), "f.toml:1:5: a: found true, expected a number");
    EXPECT_EQ(said("a = [3]", ask), "f.toml:1:5: a: found a list, expected a number");
    EXPECT_EQ(said("a = { b = 3 }", ask), "f.toml:1:5: a: found a table, expected a number");
    EXPECT_EQ(said("a = 2026-01-01", ask), "f.toml:1:5: a: found a date or time, expected a number");
}

TEST(TomlReaderTest, WholeNumbersAreWhole) {
    const auto ask = [](TableReader& top) { top.whole("a", 1, 8); };
    EXPECT_EQ(said("a = 8", ask), "accepted");
    EXPECT_EQ(said("a = 8.0", ask), "accepted");
    EXPECT_EQ(said("a = 1.5", ask), "f.toml:1:5: a: found 1.5, expected a whole number from 1 to 8");
    EXPECT_EQ(said("a = 9223372036854775807", ask),
              "f.toml:1:5: a: found 9223372036854775807, expected a whole number from 1 to 8");
    EXPECT_EQ(said("a = nan", ask),
              "f.toml:1:5: a: found a value that is not finite, expected a whole number from 1 to 8");
}

TEST(TomlReaderTest, ListsNameTheElementThatIsWrong) {
    EXPECT_EQ(said("a = [\n 1,\n \"two\" ]", [](TableReader& top) { top.numbers("a"); }),
              "f.toml:3:2: a: found the text 'two', expected a number");
    EXPECT_EQ(said("a = [\"x\",\n 1]", [](TableReader& top) { top.texts("a"); }),
              "f.toml:2:2: a: found 1, expected a text in quotes");
    EXPECT_EQ(said("a = [1,\n 2.5]", [](TableReader& top) { top.whole_numbers("a", 0, 9); }),
              "f.toml:2:2: a: found 2.5, expected a whole number from 0 to 9");
    EXPECT_EQ(said("a = \"x\"", [](TableReader& top) { top.numbers("a"); }),
              "f.toml:1:5: a: found the text 'x', expected a number or a list of numbers");
}

TEST(TomlReaderTest, OtherTypesAreNamedToo) {
    EXPECT_EQ(said("a = 3", [](TableReader& top) { top.text("a"); }),
              "f.toml:1:5: a: found 3, expected a text in quotes");
    EXPECT_EQ(said("a = \"\"", [](TableReader& top) { top.need_text("a"); }),
              "f.toml:1:5: a: found an empty text, expected a text in quotes");
    EXPECT_EQ(said("a = 1", [](TableReader& top) { top.flag("a"); }),
              "f.toml:1:5: a: found 1, expected true or false");
    EXPECT_EQ(said("a = 1", [](TableReader& top) { top.table("a", [](TableReader&) {}); }),
              "f.toml:1:5: a: found 1, expected a table");
    EXPECT_EQ(said("[a]", [](TableReader& top) { top.tables("a", [](TableReader&) {}); }),
              "f.toml:1:1: a: found a table, expected tables [[a]]");
    EXPECT_EQ(said("a = [1]", [](TableReader& top) { top.tables("a", [](TableReader&) {}); }),
              "f.toml:1:6: a: found 1, expected tables [[a]]");
}

TEST(TomlReaderTest, ChoicesAreListedAndTheNearestNamed) {
    const auto ask = [](TableReader& top) { top.need_choice("a", {"tones", "sweep", "none"}); };
    EXPECT_EQ(said("a = \"tones\"", ask), "accepted");
    EXPECT_EQ(said("a = \"sweeep\"", ask),
              "f.toml:1:5: a: found 'sweeep', expected tones, sweep or none; did you mean 'sweep'?");
    EXPECT_EQ(said("a = \"whistle\"", ask), "f.toml:1:5: a: found 'whistle', expected tones, sweep or none");
    EXPECT_EQ(said("", ask), "f.toml:1:1: a: found nothing, expected tones, sweep or none");
}

TEST(TomlReaderTest, TablesAreNamedAsTheyStandInTheFile) {
    const auto nested = [](TableReader& top) {
        top.table("outer", [](TableReader& outer) {
            outer.table("inner", [](TableReader& inner) { inner.number("a"); });
        });
    };
    EXPECT_EQ(said("[outer.inner]\na = \"x\"", nested),
              "f.toml:2:5: in [outer.inner] a: found the text 'x', expected a number");
    const auto listed_tables = [](TableReader& top) {
        top.tables("step", [](TableReader& step) {
            step.tables("point", [](TableReader& point) { point.need_number("f"); });
        });
    };
    EXPECT_EQ(said("[[step]]\n[[step]]\npoint = [{ f = 1 },\n { }]", listed_tables),
              "f.toml:4:2: in [[step]] point f: found nothing, expected a number from -1e+12 to 1e+12");
}

TEST(TomlReaderTest, MissingKeysPointAtTheMisspeltOneInTheirPlace) {
    const auto ask = [](TableReader& top) {
        top.table("t", [](TableReader& table) { table.need_text("measure"); });
    };
    EXPECT_EQ(
        said("[t]\nb = 1\nmesure = \"gain\"", ask),
        "f.toml:3:1: in [t] measure: found nothing, expected a text in quotes; did you mean 'measure' where "
        "'mesure' stands?");
    EXPECT_EQ(said("[t]\nb = 1", ask),
              "f.toml:1:1: in [t] measure: found nothing, expected a text in quotes");
}

TEST(TomlReaderTest, AKeyThatIsAskedForLaterIsNoMisspeltOne) {
    EXPECT_EQ(said("input_full_scale_dbu = 3",
                   [](TableReader& top) {
                       top.need_number("output_full_scale_dbu", {0.0, 1.0});
                   }),
              "f.toml:1:1: output_full_scale_dbu: found nothing, expected a number from 0 to 1");
}

TEST(TomlReaderTest, UnknownKeysAreErrorsThatNameTheNearest) {
    const auto ask = [](TableReader& top) {
        top.table("t", [](TableReader& table) {
            table.number("length_s");
            table.text("setting");
        });
    };
    EXPECT_EQ(
        said("[t]\nlength = 3", ask),
        "f.toml:2:1: in [t]: found the unknown key 'length', expected a known one; did you mean 'length_s'?");
    EXPECT_EQ(said("[t]\ncolour = 3", ask),
              "f.toml:2:1: in [t]: found the unknown key 'colour', expected one of length_s or setting");
}

TEST(TomlReaderTest, TheFirstUnknownKeyOfTheFileIsNamed) {
    EXPECT_EQ(said("zebra = 1\napple = 2\n", [](TableReader& top) { top.finish(); }).substr(0, 43),
              "f.toml:1:1: found the unknown key 'zebra', ");
}

TEST(TomlReaderTest, OnlyAllowedKeysPass) {
    EXPECT_EQ(said("plans = 1",
                   [](TableReader& top) {
                       top.allow_only({"plan", "name"});
                   }),
              "f.toml:1:1: found the unknown key 'plans', expected a known one; did you mean 'plan'?");
}

TEST(TomlReaderTest, SchemasOfOtherKindsAndVersionsAreToldApart) {
    const auto ask = [](TableReader& top) { read_schema(top, "rig", "a rig file"); };
    const std::string expected = "expected \"coldpin-rig/1\" (a rig file)";
    EXPECT_EQ(said("schema = \"coldpin-rig/1\"", ask), "accepted");
    EXPECT_EQ(said("", ask), "f.toml:1:1: schema: found nothing, " + expected);
    EXPECT_EQ(said("schema = \"coldpin-rig/2\"", ask),
              "f.toml:1:10: schema: found 'coldpin-rig/2', " + expected +
                  ": the file was written for another version of this program");
    EXPECT_EQ(said("schema = \"coldpin-device/1\"", ask), "f.toml:1:10: schema: found 'coldpin-device/1', " +
                                                              expected + ": is this a file of another kind?");
    EXPECT_EQ(said("schema = \"coldpinrig/1\"", ask),
              "f.toml:1:10: schema: found 'coldpinrig/1', " + expected + "; did you mean 'coldpin-rig/1'?");
    EXPECT_EQ(said("schema = 1", ask), "f.toml:1:10: schema: found 1, expected a text in quotes");
}

TEST(TomlReaderTest, BrokenSyntaxHasTheShapeOfAllErrors) {
    EXPECT_EQ(syntax("a = 1\nb 2"), "f.toml:2:3: found '2', expected '=' in a key and its value");
    EXPECT_EQ(syntax("[table\n"), "f.toml:1:7: found the end of the line, expected ']' in a table header");
    EXPECT_EQ(syntax("a = \"open\nb = 1"),
              "f.toml:1:10: found the end of the line, expected the closing quote of a text");
    EXPECT_EQ(syntax("a = 'open\r\nb = 1"),
              "f.toml:1:10: found the end of the line, expected the closing quote of a text");
    EXPECT_EQ(syntax("a = \"\xC3\xB6\xC3\xB6\n"),
              "f.toml:1:8: found the end of the line, expected the closing quote of a text");
    EXPECT_EQ(syntax("a = 1\na = 2"), "f.toml:2:5: found a second integer 'a', expected each name once");
    EXPECT_EQ(
        syntax("a = 007"),
        "f.toml:1:8: found a whole number that cannot be read (leading zeroes are prohibited), expected "
        "valid TOML");
    EXPECT_THAT(syntax("a = [1,"), testing::StartsWith("f.toml:1:"));
    EXPECT_THAT(syntax("\xFF\xFE"), testing::HasSubstr("invalid utf-8"));
}

TEST(ShownTest, KeepsPlainAndAccentedTextAndShortensLongOne) {
    EXPECT_EQ(shown("40 dB"), "40 dB");
    EXPECT_EQ(shown("75 \xCE\xA9"), "75 \xCE\xA9");
    EXPECT_EQ(shown(std::string(100, 'x')), std::string(60, 'x') + "...");
}

TEST(ShownTest, LetsNoControlCharacterOrBrokenUtf8Through) {
    EXPECT_EQ(shown("a\x1B[31m\nb"), "a?[31m?b");
    EXPECT_EQ(shown("\xC3"), "?");
    EXPECT_EQ(shown("\xC3(\xFFx"), "?(?x");
    EXPECT_EQ(shown(std::string("\0z", 2)), "?z");
}

TEST(DidYouMeanTest, NamesTheNearestWordOrTheOneWithTheUnitThatWasForgotten) {
    EXPECT_EQ(did_you_mean("gian", {"gain", "noise"}), "; did you mean 'gain'?");
    EXPECT_EQ(did_you_mean("latency", {"leakage_db", "latency_frames"}), "; did you mean 'latency_frames'?");
    EXPECT_EQ(did_you_mean("late", {"latency_frames"}), "");
    EXPECT_EQ(did_you_mean("gain", {"gain"}), "");
    EXPECT_EQ(did_you_mean("", {"_gain"}), "");
}

TEST(ListedTest, ReadsAsASentence) {
    EXPECT_EQ(listed({"a"}), "a");
    EXPECT_EQ(listed({"a", "b"}), "a or b");
    EXPECT_EQ(listed({"a", "b", "c"}), "a, b or c");
}

}  // namespace
}  // namespace coldpin::profile
