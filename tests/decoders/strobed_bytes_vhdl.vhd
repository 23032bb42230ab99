-- A count behind a bus: an edge of `take` copies it to two bytes, which are read one after another.
library ieee;
use ieee.std_logic_1164.all;
use ieee.numeric_std.all;

entity strobed_bytes_vhdl is
  port (
    clk, rst_n : in std_logic;
    quad       : in std_logic_vector(1 downto 0);
    take       : in std_logic;
    low_byte   : out std_logic_vector(7 downto 0);
    high_byte  : out std_logic_vector(7 downto 0)
  );
end entity;

architecture rtl of strobed_bytes_vhdl is
  signal meta, seen, last : std_logic_vector(1 downto 0);
  signal take_seen, take_last : std_logic;
  signal count, copy : signed(15 downto 0);
begin
  low_byte <= std_logic_vector(copy(7 downto 0));
  high_byte <= std_logic_vector(copy(15 downto 8));

  process (clk, rst_n)
  begin
    if rst_n = '0' then
      meta <= "00";
      seen <= "00";
      last <= "00";
      take_seen <= '0';
      take_last <= '0';
      count <= (others => '0');
      copy <= (others => '0');
    elsif rising_edge(clk) then
      meta <= quad;
      seen <= meta;
      last <= seen;
      take_seen <= take;
      take_last <= take_seen;
      if (seen(1) xor seen(0) xor last(1) xor last(0)) = '1' then
        if (seen(1) xor last(0)) = '1' then
          count <= count + 1;
        else
          count <= count - 1;
        end if;
      end if;
      if take_seen = '1' and take_last = '0' then
        copy <= count;
      end if;
    end if;
  end process;
end architecture;
