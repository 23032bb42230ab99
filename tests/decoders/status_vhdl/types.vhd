library ieee;
use ieee.std_logic_1164.all;
use ieee.numeric_std.all;

package status_types is
  type way is (STILL, UP, DOWN);
  type status is record
    count : unsigned(15 downto 0);
    lost  : std_logic;
  end record;
end package;
