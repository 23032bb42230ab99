-- All outputs in a record and an enumeration; a mid-scale start; the low part of the count is a port of its own as well.
library ieee;
use ieee.std_logic_1164.all;
use ieee.numeric_std.all;
use work.status_types.all;

entity status_vhdl is
  port (
    clk, rst_n : in std_logic;
    a, b       : in std_logic;
    ack        : in std_logic;
    result     : out status;
    moved      : out way
  );
end entity;

architecture rtl of status_vhdl is
  signal seen, last : std_logic_vector(1 downto 0);
  signal value : unsigned(15 downto 0);
begin
  result.count <= value;

  process (clk, rst_n)
    variable change : std_logic_vector(1 downto 0);
  begin
    if rst_n = '0' then
      seen <= "00";
      last <= "00";
      value <= x"8000";
      moved <= STILL;
      result.lost <= '0';
    elsif falling_edge(clk) then
      change := seen xor last;
      seen <= a & b;
      last <= seen;
      if ack = '1' then
        result.lost <= '0';
      end if;
      if change = "11" then
        result.lost <= '1';
      elsif change /= "00" then
        if (seen(1) xor last(0)) = '1' then
          value <= value + 1;
          moved <= UP;
        else
          value <= value - 1;
          moved <= DOWN;
        end if;
      end if;
    end if;
  end process;
end architecture;
